"""Help of an algorithm as HTML, from its JSON file, its parameters and the fields."""

import html
import json
from pathlib import Path

__all__ = ["HELP_FOLDER", "help_html", "read_help"]

HELP_FOLDER = Path(__file__).resolve().parent / "help"


def read_help(name):
    """Read the help of an algorithm.

    Parameters
    ----------
    name : str
        Id of the algorithm.

    Returns
    -------
    dict
        ``summary`` (text), ``inputs`` (text), ``outputs`` (text by layer or output
        name), ``assumptions`` and ``references`` (lists of text).
    """
    path = HELP_FOLDER / f"{name}.json"
    return json.loads(path.read_text(encoding="utf-8"))


def help_html(name, definitions):
    """Write the help of an algorithm as HTML.

    Parameters
    ----------
    name : str
    definitions : list of QgsProcessingParameterDefinition

    Returns
    -------
    str
    """
    document = read_help(name)
    parts = [_paragraph(document["summary"]), _heading("Inputs")]
    parts.append(_paragraph(document["inputs"]))
    parts += [_term(d.description(), d.help()) for d in definitions]
    parts.append(_heading("Outputs"))
    for output, text in document["outputs"].items():
        parts += [_term(output, text), _fields(output)]
    parts += [_heading("Assumptions"), _list(document["assumptions"])]
    if document["references"]:
        parts += [_heading("References"), _list(document["references"])]
    return "\n".join(part for part in parts if part)


def _fields(layer_name):
    """Fields of an output layer with their meaning; nothing for other outputs."""
    from .fields import LAYERS

    spec = LAYERS.get(layer_name)
    if spec is None:
        return ""
    rows = (
        f"<li><i>{html.escape(f.name)}</i>: {html.escape(f.comment)}</li>"
        for f in spec.fields
    )
    return f"<ul>{''.join(rows)}</ul>"


def _heading(text):
    return f"<h3>{html.escape(text)}</h3>"


def _paragraph(text):
    return f"<p>{html.escape(text)}</p>"


def _term(term, text):
    words = html.escape(text).replace("\n", "<br/>")
    return f"<p><b>{html.escape(term)}</b><br/>{words}</p>"


def _list(texts):
    return f"<ul>{''.join(f'<li>{html.escape(t)}</li>' for t in texts)}</ul>"

"""Every refusal and every doubt of the core has a test that names its code."""

import ast
import re

import pytest
from house_rules import ROOT

CODE = re.compile(r"[a-z]+(-[a-z]+)+")
#: Words of the trade and of files that look like codes.
WORDS = {"cut-off", "cut-offs", "us-ft", "heaveline-study"}
#: One word is a code too where it says all.
CODES_OF_ONE_WORD = {"cancelled"}
MODULES = (
    "balance",
    "balancing",
    "burial",
    "compaction",
    "comparing",
    "comparison",
    "construction",
    "cutoffs",
    "documents",
    "doubts",
    "fault",
    "forward",
    "growth",
    "kinematics",
    "lostarea",
    "picks",
    "plot_comparison",
    "porosity",
    "problem",
    "profile",
    "recipe",
    "regression",
    "restoration",
    "section",
    "separation",
    "sources",
    "stepping",
    "study",
    "subsidiary",
    "transport",
    "units",
    "walls",
)


def codes_in(source):
    """Codes of refusals and doubts in a source: its hyphenated string constants."""
    texts = {
        node.value
        for node in ast.walk(ast.parse(source))
        if isinstance(node, ast.Constant) and isinstance(node.value, str)
    }
    hyphenated = {t for t in texts if CODE.fullmatch(t)} - WORDS
    return hyphenated | (texts & CODES_OF_ONE_WORD)


def test_codes_are_found_where_they_stand():
    """A planted refusal is seen; words of the trade are not taken for codes."""
    source = 'raise PicksError("no-such-thing", "A cut-off is not there.", "cut-off")'
    assert codes_in(source) == {"no-such-thing"}


@pytest.mark.parametrize("module", MODULES)
def test_every_code_of_a_module_is_named_in_a_test(module):
    """A refusal or doubt that nothing triggers in the tests is not known to work."""
    tested = "\n".join(
        path.read_text(encoding="utf-8")
        for path in sorted((ROOT / "tests").rglob("test_*.py"))
        if path.name != "test_every_code.py"
    )
    source = (ROOT / "geomcore" / f"{module}.py").read_text(encoding="utf-8")
    missing = [code for code in sorted(codes_in(source)) if f'"{code}"' not in tested]
    assert missing == []

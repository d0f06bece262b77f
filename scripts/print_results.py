"""Print what a run wrote: one line per section, then where everything is.

Usage: python scripts/print_results.py results.gpkg [folder or file ...]
"""

import contextlib
import sqlite3
import sys
from pathlib import Path

# One line per section and horizon; a section without a prediction has its own line.
_QUERY = """
    select s.section_id, t.horizon, t.heave, t.throw, t.displacement,
           t.detachment_z, t.z_base, t.length_unit, t.warnings
    from section_lines as s
    left join predicted_fault_traces as t
        on t.section_id = s.section_id and t.run_id = s.run_id and t.band = 'best'
    order by s.fid, t.horizon
"""
_HEADS = ("section", "horizon", "heave", "throw", "displacement", "fault reaches z")


def read_rows(path):
    """Read the rows of the table from the GeoPackage, which is opened read-only."""
    uri = Path(path).resolve().as_uri() + "?mode=ro"
    with contextlib.closing(sqlite3.connect(uri, uri=True)) as connection:
        connection.row_factory = sqlite3.Row
        return connection.execute(_QUERY).fetchall()


def cells(row):
    """Write one row as text, with the level of the detachment or the depth reached."""
    if row["horizon"] is None and row["z_base"] is None:
        return (str(row["section_id"]), "no prediction", "", "", "", "")
    numbers = (number(row[key]) for key in ("heave", "throw", "displacement"))
    return (str(row["section_id"]), str(row["horizon"]), *numbers, depth(row))


def depth(row):
    """Say how deep: a detachment only where one was found, else 'below'."""
    if row["detachment_z"] is not None:
        return f"detachment at {number(row['detachment_z'])}"
    return f"below {number(row['z_base'])}"


def number(value):
    """Write a length; an unknown one is a dash."""
    return "-" if value is None else f"{value:.0f}"


def table(lines):
    """Lay out lines of cells in columns; numbers stand to the right."""
    widths = [max(map(len, column)) for column in zip(*lines)]
    for line in lines:
        parts = [
            cell.rjust(width) if 2 <= place <= 4 else cell.ljust(width)
            for place, (cell, width) in enumerate(zip(line, widths))
        ]
        yield "  ".join(parts).rstrip()


def warnings(rows):
    """Give the warnings, each once, with the sections that have it."""
    sections = {}
    for row in rows:
        for text in (row["warnings"] or "").split("\n"):
            # the section is named in front already
            text = text.strip().removeprefix(f"section {row['section_id']}: ")
            if text:
                sections.setdefault(text, []).append(str(row["section_id"]))
    for text, names in sections.items():
        yield f"  {', '.join(names)}: {text}"


def main(arguments):
    """Print table, warnings and places; fail if there is no prediction at all."""
    path, *places = arguments
    rows = read_rows(path)
    units = {row["length_unit"] for row in rows} - {None}
    print(f"Lengths in {', '.join(sorted(units)) or 'the unit of the study'}.")
    print("\n".join(table([_HEADS, *map(cells, rows)])))
    found = list(warnings(rows))
    print("\nWarnings:" if found else "\nNo warnings.")
    print("\n".join(found))
    print("\n".join(f"{place}" for place in [f"layers   {path}", *places]))
    if all(row["z_base"] is None for row in rows):
        sys.exit("error: no section has a prediction")


if __name__ == "__main__":
    main(sys.argv[1:])

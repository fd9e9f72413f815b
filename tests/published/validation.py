"""The list of what was checked against what, written to docs/validation.md.

Run ``python -m tests.published.validation`` after a change to the figures.
"""

from __future__ import annotations

from pathlib import Path

from tests.published import (
    closed_forms,
    low_voltage,
    neutrals,
    patterns,
    protection,
    simultaneous,
    three_bus_loop,
    two_machine,
    windings,
)
from tests.published.figures import Example

EXAMPLES: tuple[Example, ...] = (
    *two_machine.EXAMPLES,
    *three_bus_loop.EXAMPLES,
    *low_voltage.EXAMPLES,
    *patterns.EXAMPLES,
    *closed_forms.EXAMPLES,
    *windings.EXAMPLES,
    *protection.EXAMPLES,
    *neutrals.EXAMPLES,
    *simultaneous.EXAMPLES,
)
PAGE = Path(__file__).parents[2] / "docs" / "validation.md"

HEAD = """# What was checked against what

This page is written by `python -m tests.published.validation` from the data of the tests in
`tests/published/`; a test fails when it is out of date. Values are those of the named source; where
one was recalled from memory its section says so. "Got" is what this version computes, the tolerance
what the test allows, relative to the figure.

Three more proofs stand beside these figures, in the same test run:

- **A referee** (`tests/referee.py`): a solver of its own in phase coordinates, with explicit windings,
  star points and delta loops, that shares no code with the package and knows no symmetrical
  components. Random networks over every element must agree with it to 1e-8 of the largest value.
- **Properties**: reciprocity of each sequence network, current balance at every bus, star point and
  delta, the same answer on any base power, the limits of resistors towards solid and isolated.
- **The balance check** that every single answer passes before it is shown.
"""


def page() -> str:
    """The page as text."""
    out = [HEAD]
    for example in EXAMPLES:
        out += [f"\n## {example.title}\n", f"Source: {example.source}. Values: {example.origin}."]
        out += [f"Exercises: {example.exercises}.\n", "| quantity | published | got | unit | tolerance |"]
        out.append("|---|---|---|---|---|")
        for figure in example.figures:
            got = figure.got()
            text = f"{got:.6g}" if abs(got) > 1e-9 else "0"
            quantity = figure.quantity.replace("|", "\\|")
            printed, tolerance = f"{figure.published:.10g}", f"{figure.tolerance:g}"
            cells = (quantity, printed, text, figure.unit or "1", tolerance)
            out.append(f"| {' | '.join(cells)} |")
    return "\n".join(out) + "\n"


if __name__ == "__main__":
    PAGE.write_text(page(), encoding="utf-8")

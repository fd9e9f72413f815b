"""The command line run inside the test process, and the cases the tests read."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

PLANT = Path(__file__).with_name("plant.toml")


@dataclass(frozen=True)
class Result:
    code: int
    out: str
    err: str

    @property
    def tree(self) -> dict[str, Any]:
        """Standard output as JSON, refusing the NaN and Infinity that JSON does not have."""

        def refuse(token: str) -> Any:
            raise AssertionError(f"{token} in JSON")

        tree: dict[str, Any] = json.loads(self.out, parse_constant=refuse)
        return tree

    @property
    def flat(self) -> str:
        """Standard output with every wrapping undone."""
        return " ".join(self.out.split())

    def row(self, label: str, after: str = "") -> list[str]:
        """The cells of the first line that begins with ``label`` behind the text ``after``."""
        for line in self.out.partition(after)[2].splitlines() if after else self.out.splitlines():
            if line.strip().startswith(label):
                return line.strip().removeprefix(label).split()
        raise AssertionError(f"no line begins with {label!r}:\n{self.out}")


Run = Callable[..., Result]
Write = Callable[[dict[str, Any]], Path]


def unearthed(**more: Any) -> dict[str, Any]:
    """A pump station behind a delta winding: nothing joins its 11 kV to earth."""
    return {
        "title": "Lowther Edge booster, unearthed 11 kV",
        "frequency": "50 Hz",
        "buses": {"intake": "33 kV", "main": "11 kV", "spare": "11 kV"},
        "infeeds": {"utility": {"bus": "intake", "three_phase": "500 MVA", "x_over_r": 10, "z0": "open"}},
        "transformers": {
            "T1": {
                "vector_group": "Dd0",
                "rating": "10 MVA",
                "impedance": "10 %",
                "x_over_r": 15,
                "hv": {"bus": "intake", "voltage": "33 kV"},
                "lv": {"bus": "main", "voltage": "11 kV"},
            }
        },
        **more,
    }

"""Unbalanced fault currents and voltages of power networks, from nameplates.

Read a case, make its network, ask for faults; SI units throughout, angles relative to phase a at
the faulted place before the fault.

>>> import seqfault
>>> case = seqfault.case_from_tree({
...     "title": "Tarn Beck filter house", "frequency": "50 Hz",
...     "buses": {"intake": "33 kV", "main": "11 kV"},
...     "infeeds": {"utility": {"bus": "intake", "three_phase": "500 MVA", "x_over_r": 10,
...                             "z0": "open"}},
...     "neutrals": {"NER": {"resistance": "16 ohm"}},
...     "transformers": {"T1": {
...         "vector_group": "Dyn11", "rating": "10 MVA", "impedance": "10 %", "x_over_r": 15,
...         "hv": {"bus": "intake", "voltage": "33 kV"},
...         "lv": {"bus": "main", "voltage": "11 kV", "neutral": "NER"}}},
... })
>>> network = seqfault.Network(case)
>>> fault = network.fault("main", "line-ground")
>>> round(abs(fault.residual))
393
>>> [(path.path, round(abs(path.current))) for path in fault.home]
[('NER', 393)]
>>> seqfault.compare(network, "main").greatest.kind
'three-phase'
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from seqfault.case.reader import case_from_tree, read_case
    from seqfault.case.records import Case
    from seqfault.case.scenarios import in_state
    from seqfault.errors import (
        CaseError,
        CheckError,
        InputError,
        NoAnswerError,
        QuantityError,
        RequestError,
        SeqfaultError,
    )
    from seqfault.faults.kinds import Fault
    from seqfault.faults.network import Network
    from seqfault.faults.solution import FaultSolution
    from seqfault.studies.compare import Comparison, compare
    from seqfault.studies.contributions import Contributions, contributions
    from seqfault.studies.levels import Levels, levels

__version__ = "0.1.0"

__all__ = [
    "Case",
    "CaseError",
    "CheckError",
    "Comparison",
    "Contributions",
    "Fault",
    "FaultSolution",
    "InputError",
    "Levels",
    "Network",
    "NoAnswerError",
    "QuantityError",
    "RequestError",
    "SeqfaultError",
    "__version__",
    "case_from_tree",
    "compare",
    "contributions",
    "in_state",
    "levels",
    "read_case",
]

_HOMES = {
    "seqfault.case.reader": ("case_from_tree", "read_case"),
    "seqfault.case.records": ("Case",),
    "seqfault.case.scenarios": ("in_state",),
    "seqfault.errors": (
        "CaseError",
        "CheckError",
        "InputError",
        "NoAnswerError",
        "QuantityError",
        "RequestError",
        "SeqfaultError",
    ),
    "seqfault.faults.kinds": ("Fault",),
    "seqfault.faults.network": ("Network",),
    "seqfault.faults.solution": ("FaultSolution",),
    "seqfault.studies.compare": ("Comparison", "compare"),
    "seqfault.studies.contributions": ("Contributions", "contributions"),
    "seqfault.studies.levels": ("Levels", "levels"),
}


def __getattr__(name: str) -> Any:
    # Loaded when first asked for: ``import seqfault`` and ``seqfault --help`` stay cheap.
    for module, names in _HOMES.items():
        if name in names:
            from importlib import import_module

            value = getattr(import_module(module), name)
            globals()[name] = value
            return value
    raise AttributeError(f"module 'seqfault' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)

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
    from seqfault.case.steps import read_steps
    from seqfault.errors import (
        CaseError,
        CheckError,
        InputError,
        NoAnswerError,
        QuantityError,
        RequestError,
        SeqfaultError,
    )
    from seqfault.faults.kinds import Fault, fault_at
    from seqfault.faults.network import Network
    from seqfault.faults.solution import FaultSolution
    from seqfault.studies.along import Along, along
    from seqfault.studies.compare import Comparison, compare
    from seqfault.studies.contributions import Contributions, contributions
    from seqfault.studies.levels import Levels, levels
    from seqfault.studies.neutral import NeutralReport, study_neutral
    from seqfault.studies.neutral_target import Target, find_target
    from seqfault.studies.operate import Operation, operate
    from seqfault.studies.replay import Replay, replay
    from seqfault.studies.settings import Settings, study_settings
    from seqfault.studies.settings_proposal import Proposal, propose_settings
    from seqfault.studies.steps import Evolution, evolve
    from seqfault.studies.winding_cover import WindingCover, winding_cover

__version__ = "0.1.0"

__all__ = [
    "Along",
    "Case",
    "CaseError",
    "CheckError",
    "Comparison",
    "Contributions",
    "Evolution",
    "Fault",
    "FaultSolution",
    "InputError",
    "Levels",
    "Network",
    "NeutralReport",
    "NoAnswerError",
    "Operation",
    "Proposal",
    "QuantityError",
    "Replay",
    "RequestError",
    "SeqfaultError",
    "Settings",
    "Target",
    "WindingCover",
    "__version__",
    "along",
    "case_from_tree",
    "compare",
    "contributions",
    "evolve",
    "fault_at",
    "find_target",
    "in_state",
    "levels",
    "operate",
    "propose_settings",
    "read_case",
    "read_steps",
    "replay",
    "study_neutral",
    "study_settings",
    "winding_cover",
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
    "seqfault.case.steps": ("read_steps",),
    "seqfault.faults.kinds": ("Fault", "fault_at"),
    "seqfault.faults.network": ("Network",),
    "seqfault.faults.solution": ("FaultSolution",),
    "seqfault.studies.along": ("Along", "along"),
    "seqfault.studies.compare": ("Comparison", "compare"),
    "seqfault.studies.contributions": ("Contributions", "contributions"),
    "seqfault.studies.levels": ("Levels", "levels"),
    "seqfault.studies.neutral": ("NeutralReport", "study_neutral"),
    "seqfault.studies.neutral_target": ("Target", "find_target"),
    "seqfault.studies.operate": ("Operation", "operate"),
    "seqfault.studies.replay": ("Replay", "replay"),
    "seqfault.studies.winding_cover": ("WindingCover", "winding_cover"),
    "seqfault.studies.settings": ("Settings", "study_settings"),
    "seqfault.studies.settings_proposal": ("Proposal", "propose_settings"),
    "seqfault.studies.steps": ("Evolution", "evolve"),
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

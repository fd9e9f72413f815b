"""What is asked of the settings, with what is usual where the case file is silent."""

from __future__ import annotations

import msgspec

from seqfault.case.protection import Demands, MarginTerms
from seqfault.case.quantities import Quantity
from seqfault.case.records import Case
from seqfault.equations import grading
from seqfault.model.assumptions import Ledger

SEE = 1.5
"""What must be seen, in pickups (common practice)."""
KEEP_STILL = 1.3
"""The pickup, in what must not be seen (common practice)."""
TIGHT = 0.10
"""A demand met by less than this share is tight (the program's own)."""


class Demanded(msgspec.Struct, frozen=True):
    """The demands in SI units, every default filled in.

    ``fault_resistances`` in ohm; ``see``, ``keep_still`` and ``tight`` numbers; ``least`` the states in
    which the least is to be seen, of the file; ``relay_error`` and ``ct_error`` fractions of a time;
    ``breaker``, ``overshoot``, ``safety`` in s.
    """

    fault_resistances: tuple[float, ...]
    see: float
    keep_still: float
    least: tuple[str, ...]
    tight: float
    relay_error: float
    ct_error: float
    breaker: float
    overshoot: float
    safety: float

    def margin(self, time: float, breaker: float | None = None) -> float:
        """Margin (s) behind a relay that operates in ``time`` and whose breaker takes ``breaker`` (s)."""
        taken = self.breaker if breaker is None else breaker
        margin = grading.grading_margin(
            time, self.relay_error, self.ct_error, taken, self.overshoot, self.safety
        )
        return float(margin)


def demanded(case: Case, ledger: Ledger) -> Demanded:
    """The demands of ``case``; what it does not state is noted in ``ledger``."""
    stated, terms = case.demands, case.demands.margin or MarginTerms()

    def factor(field: str, usual: float, text: str) -> float:
        value: float | None = getattr(stated, field)
        if value is None:
            ledger.note("demands", field, f"not stated, taken as {usual:g} ({text})")
        return usual if value is None else value

    def term(owner: Demands | MarginTerms, field: str, usual: float, unit: str) -> float:
        quantity: Quantity | None = getattr(owner, field)
        if quantity is not None:
            return float(quantity.value.real)
        name = field if owner is stated else f"margin.{field}"
        shown = f"{100 * usual:g} %" if unit == "%" else f"{usual:g} {unit}"
        whose = "the program's own" if field == "tight" else "common practice"
        ledger.note("demands", name, f"not stated, taken as {shown} ({whose})")
        return usual

    ohms = tuple(float(one.value.real) for one in stated.fault_resistances)
    if not ohms:
        ledger.note("demands", "fault_resistances", "not stated, so only a bolted fault must be seen")
    if not stated.least:
        ledger.note("demands", "least", "not stated, so what must be seen must be so in every state")
    return Demanded(
        fault_resistances=ohms or (0.0,),
        see=factor("see", SEE, "common practice: the least fault current over the pickup"),
        keep_still=factor("keep_still", KEEP_STILL, "common practice: the pickup over what it may not see"),
        least=stated.least or ("base", *case.scenarios),
        tight=term(stated, "tight", TIGHT, "%"),
        relay_error=term(terms, "relay_error", grading.RELAY_ERROR, "%"),
        ct_error=term(terms, "ct_error", grading.CT_ERROR, "%"),
        breaker=term(terms, "breaker", grading.BREAKER, "s"),
        overshoot=term(terms, "overshoot", grading.OVERSHOOT, "s"),
        safety=term(terms, "safety", grading.SAFETY, "s"),
    )

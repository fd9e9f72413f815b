"""Rules for what is demanded of the settings."""

from __future__ import annotations

from seqfault.case.subject import Site, Subject, real, said
from seqfault.case.wording import Spelling
from seqfault.errors import quoted

_LARGEST_FACTOR = 20.0
_LARGEST_ERROR = 0.5


def check_demands(site: Site) -> None:
    """Tell what is wrong or doubtful about the demands."""
    demands, subject = site.case.demands, Subject(site, "demands", "")
    for ohms in demands.fault_resistances:
        subject.positive({"fault_resistances": ohms}, zero=True)
    for field in ("see", "keep_still"):
        factor = getattr(demands, field)
        if factor is not None and not 1 <= factor <= _LARGEST_FACTOR:
            problem = f"{factor:g}: this factor is from 1 to {_LARGEST_FACTOR:g}"
            if 100 <= factor <= 100 * _LARGEST_FACTOR:
                problem += f"; write {factor / 100:g}?"
            subject.error(field, problem)
    _share(subject, "tight", demands, 1.0)
    margin = demands.margin
    if margin is None:
        return
    for field in ("relay_error", "ct_error"):
        _share(subject, f"margin.{field}", margin, _LARGEST_ERROR)
    for field in ("breaker", "overshoot", "safety"):
        subject.positive({f"margin.{field}": getattr(margin, field)}, zero=True)


def check_least(site: Site) -> None:
    """Tell which of the least states the file does not have; for the file itself, not for a state of it."""
    known = ("base", *site.case.scenarios)
    subject = Subject(site, "demands", "")
    for name in site.case.demands.least:
        if name not in known:
            subject.error("least", f"there is no scenario {quoted(name)}{Spelling(known).hint(name)}")


def _share(subject: Subject, field: str, owner: object, most: float) -> None:
    quantity = getattr(owner, field.rpartition(".")[2])
    value = real(quantity)
    if value is not None and not 0 <= value < most:
        subject.error(field, f"{said(quantity)}: this is 0 % or more, and below {100 * most:g} %")

"""Rules for where a relay stands, and for what it protects."""

from __future__ import annotations

from seqfault.case.protection import Relay
from seqfault.case.relay_sites import Places, StarUser, terminals
from seqfault.case.subject import Subject
from seqfault.case.wording import Spelling, listed
from seqfault.errors import quoted

_PROTECTED = (
    "buses",
    "lines",
    "generators",
    "motors",
    "earthing_transformers",
    "series_reactors",
    "capacitors",
)
_FEW = 4


def check_at(subject: Subject, relay: Relay, places: Places) -> tuple[StarUser, ...] | None:
    """Return the windings of the star point a relay stands at, none where it stands at an element."""
    name, mark, bus = relay.at.partition("@")
    if mark:
        _at_element(subject, relay, name, bus, places)
        return None
    users = places.stars.get(name, ())
    if users or name in subject.site.case.neutrals:
        if relay.measures not in ("neutral", "neutral-voltage"):
            subject.error(
                "at",
                f"{quoted(name)} is a star point, where neutral or neutral-voltage is measured; "
                f"for {relay.measures} write an element and its bus, as in {_example(places)}",
            )
        return users
    no_star_point(subject, "at", name, places)
    return None


def _at_element(subject: Subject, relay: Relay, name: str, bus: str, places: Places) -> None:
    site = subject.site
    if name in site.broken:
        return
    if name not in places.elements:
        what = f"{quoted(name)} is no element that a relay can stand at"
        if name in site.names:
            subject.error("at", f"{quoted(relay.at)}: {what}; write it as in {_example(places)}")
        else:
            hint = Spelling(places.elements).hint(name)
            subject.error("at", f"{quoted(relay.at)}: there is no element {quoted(name)}{hint}")
        return
    buses = terminals(places.elements[name][1])
    if bus not in buses:
        write = listed(quoted(f"{name}@{end}") for end in buses)
        subject.error("at", f"{quoted(relay.at)}: {quoted(name)} is not at this bus; write {write}")
    elif relay.measures == "neutral":
        stars = [
            star
            for star, users in places.stars.items()
            if any((user.element, user.bus) == (name, bus) for user in users)
        ]
        write = f"write at = {quoted(stars[0])}" if stars else "write its name"
        subject.error(
            "at", f"{quoted(relay.at)}: neutral is measured between a star point and earth; {write}"
        )


def no_star_point(subject: Subject, field: str, name: str, places: Places) -> None:
    """Complain of the name of a star point that is none."""
    site = subject.site
    if name in site.broken or name.rpartition(".")[0] in site.broken:
        return
    if name in places.own:
        other = places.own[name]
        problem = f"this star point is joined to {quoted(other)} and has its name; write {quoted(other)}"
    elif _winding(subject, name):
        problem = "this winding has no star point that is brought out"
    elif name in places.elements:
        ends = terminals(places.elements[name][1])
        problem = f"at which of its buses? write {listed(quoted(f'{name}@{end}') for end in ends)}"
    elif name in site.case.buses:
        near = [f"{one}@{name}" for one, (_, r) in places.elements.items() if name in terminals(r)]
        problem = "this is a bus; write the element, and the bus behind it"
        if near:
            problem += f", as in {listed(map(quoted, near[:_FEW]))}"
    else:
        problem = f"there is no element or star point of this name{places.spelling.hint(name)}"
    subject.error(field, f"{quoted(name)}: {problem}")


def _winding(subject: Subject, name: str) -> bool:
    """Tell whether a name is that of a transformer's winding."""
    unit, _, side = name.rpartition(".")
    return unit in subject.site.case.transformers and side in ("hv", "lv", "tv")


def _example(places: Places) -> str:
    for name, (_, record) in places.elements.items():
        return quoted(f"{name}@{terminals(record)[0]}")
    return quoted("ELEMENT@BUS")


def check_protects(subject: Subject, name: str, places: Places) -> None:
    """Complain of what cannot be protected: no record, or none in which a fault can lie."""
    site = subject.site
    unit, mark, side = name.rpartition(".")
    transformer = site.case.transformers.get(unit)
    if name in site.names:
        table = site.names[name]
        if table in _PROTECTED:
            return
        if table == "transformers":
            whole = site.case.transformers.get(name)
            sides = ("hv", "lv") if whole is None or whole.tv is None else ("hv", "lv", "tv")
            write = listed((quoted(f"{name}.{each}") for each in sides), "or")
            subject.error("protects", f"{quoted(name)}: which of its windings? write {write}")
            return
        subject.error("protects", f"{quoted(name)}: {_protected_words()} is wanted")
        return
    if mark and transformer is not None and side in ("hv", "lv", "tv"):
        if getattr(transformer, side) is None:
            subject.error("protects", f"{quoted(name)}: {quoted(unit)} has no {side} winding")
        return
    if mark and unit in site.broken:
        return
    found = Spelling([n for n, table in site.names.items() if table in _PROTECTED]).hint(name)
    subject.error("protects", f"{quoted(name)}: {_protected_words()} is wanted{found}")


def _protected_words() -> str:
    return 'a bus, a line, a machine, a reactor, a capacitor or a winding as "T1.lv"'

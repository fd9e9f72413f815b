"""Rules for what a transformer states about its zero sequence."""

from __future__ import annotations

from seqfault.case.leakage import check_form, check_pairs, share
from seqfault.case.quantities import Quantity
from seqfault.case.records import Pairs, Transformer, ZeroTests
from seqfault.case.subject import Subject, said
from seqfault.case.vector_group import VectorGroup
from seqfault.case.wording import digits
from seqfault.errors import quoted


def check_zero_sequence(subject: Subject, unit: Transformer, group: VectorGroup | None) -> None:
    """Tell what is wrong about z0, z0_over_z1, zero_tests, z0_magnetising and magnetic_circuit.

    ``group`` is None where the vector group or the number of windings is in doubt.
    """
    if unit.z0 is not None and unit.z0_over_z1 is not None:
        subject.error("", "both z0 and z0_over_z1 are given; give one of the two")
    if unit.z0_over_z1 is not None and unit.z0_over_z1 <= 0:
        subject.error("z0_over_z1", f"{unit.z0_over_z1:g}: this must be more than zero")
    if not isinstance(unit.z0, Pairs):
        subject.impedance("z0", unit.z0)
    elif group is None or (group.tv is not None and not _zigzags(group)):
        check_pairs(subject, "z0", unit, unit.z0)
    subject.impedance("z0_magnetising", unit.z0_magnetising)
    if group is not None:
        if unit.zero_tests is None:
            _z0_of_group(subject, unit, group)
        _core(subject, unit, group)
    if unit.zero_tests is not None:
        _tests(subject, unit, unit.zero_tests, group)


def _zigzags(group: VectorGroup) -> int:
    return (group.hv, group.lv, group.tv).count("zigzag")


def _z0_of_group(subject: Subject, unit: Transformer, group: VectorGroup) -> None:
    zigzags = _zigzags(group)
    if not zigzags:
        if unit.z0 is not None:
            check_form(subject, "z0", unit.z0, group.tv is not None)
        return
    if unit.z0 is None:
        instead = "; z0_over_z1 does not give it" if unit.z0_over_z1 is not None else ""
        subject.error(
            "z0",
            "this is missing; a zigzag winding needs its own, seen from its terminals, "
            f"in ohm a phase or per cent on the rating{instead}",
        )
    elif isinstance(unit.z0, Pairs):
        subject.error("z0", 'it is that of the zigzag winding alone, one quantity, as in "2 %"')
    elif zigzags > 1 and unit.z0.dimension == "impedance":
        problem = f"{said(unit.z0)}: these could be ohms of either zigzag winding; write per cent"
        subject.error("z0", problem)


def _core(subject: Subject, unit: Transformer, group: VectorGroup) -> None:
    if unit.magnetic_circuit is not None or group.has_delta or (group.tv is None and _zigzags(group)):
        return
    kind = "an auto-transformer" if group.lv == "auto" else "a star-star unit"
    kind = kind if group.tv is None else "a unit of three windings"
    subject.error(
        "magnetic_circuit",
        f"this is missing; {kind} without a delta needs it: "
        '"three-limb", "five-limb", "shell-form" or "three-single-phase"',
    )


def _tests(subject: Subject, unit: Transformer, tests: ZeroTests, group: VectorGroup | None) -> None:
    if unit.z0_magnetising is not None:
        problem = "zero_tests give the magnetising impedance already; leave this out"
        subject.error("z0_magnetising", problem)
    for field in ("z0", "z0_over_z1"):
        if getattr(unit, field) is not None:
            subject.error(field, "zero_tests replace it; leave one of the two out")
    if group is not None:
        if not {group.hv, group.lv} <= {"star", "auto"}:
            written = quoted(unit.vector_group)
            subject.error("zero_tests", f"they need a star at hv and at lv, and the group is {written}")
        elif group.tv == "zigzag":
            subject.error("zero_tests", "they leave out the zigzag winding; state z0 instead")
    fields = ("from_hv", "from_lv", "from_hv_lv_shorted")
    stated: dict[str, Quantity] = {field: getattr(tests, field) for field in fields}
    sound = [subject.impedance(f"zero_tests.{field}", value) for field, value in stated.items()]
    opened = share(tests.from_hv, unit.rating, unit.hv.voltage)
    shorted = share(tests.from_hv_lv_shorted, unit.rating, unit.hv.voltage)
    if all(sound) and opened and shorted and opened <= shorted:
        subject.error(
            "zero_tests",
            f"from_hv {said(tests.from_hv)} ({digits(100 * opened)} %) must be more than "
            f"from_hv_lv_shorted {said(tests.from_hv_lv_shorted)} ({digits(100 * shorted)} %): "
            "a short circuit on lv lowers what hv sees; exchanged?",
        )

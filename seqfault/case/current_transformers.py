"""Rules for current transformers."""

from __future__ import annotations

from seqfault.case.ct_class import parse_ct_class
from seqfault.case.protection import CurrentTransformer
from seqfault.case.subject import Subject, said
from seqfault.case.units import normalised
from seqfault.errors import FieldError, quoted

_SECONDARIES = (1.0, 5.0)  # A, IEC 61869-2


def check_current_transformer(subject: Subject, ct: CurrentTransformer) -> None:
    """Tell what is wrong or doubtful about a current transformer."""
    burdens = {"burden": ct.burden, "connected_burden": ct.connected_burden}
    subject.positive(burdens, zero=True)
    subject.positive({"knee_point": ct.knee_point})
    subject.positive({"winding_resistance": ct.winding_resistance}, zero=True)
    for field, burden in burdens.items():
        if (
            burden is not None
            and burden.dimension == "power"
            and not normalised(burden.text).endswith("VA")
        ):
            subject.warn(field, f"{said(burden)}: a burden is in VA; this counts as so many VA")
    ratio = ct.ratio
    if ratio.secondary not in _SECONDARIES:
        text = f"{quoted(ratio.text, 80)}: the rated secondary is usually 1 A or 5 A"
        subject.warn("ratio", text + ("; is the ratio upside down?" if ratio.primary < 5 else ""))
    if ct.connected_burden is not None and ct.burden is not None and ct.winding_resistance is None:
        problem = "this is missing; what the connected burden does to the accuracy limit depends on it"
        subject.error("winding_resistance", problem)
    if ct.class_ is None:
        return
    try:
        kind = parse_ct_class(ct.class_)
    except FieldError as error:
        subject.error("class", str(error))
        return
    if kind.kind == "PX":
        for field in ("knee_point", "winding_resistance"):
            if getattr(ct, field) is None:
                subject.error(field, f"this is missing; class {ct.class_} needs it")
    elif ct.connected_burden is not None and ct.burden is None:
        subject.error("burden", "this is missing; the accuracy limit holds at the burden on the plate")

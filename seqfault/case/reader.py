"""A case file, TOML or JSON, to a ``Case``; every complaint about it at once."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Mapping
from typing import Any

import msgspec

from seqfault.case.checks import check, check_file
from seqfault.case.draft import draft
from seqfault.case.findings import Findings
from seqfault.case.records import Case
from seqfault.case.scenarios import check_scenarios
from seqfault.case.text import parse_text, read_bytes
from seqfault.errors import CaseError


def read_case(source: str | os.PathLike[str]) -> Case:
    """Return the case in a file, read and checked; ``-`` reads standard input.

    A suffix ``.toml`` or ``.json`` tells the form; without one the first character does.
    Raises CaseError with all complaints about the file, RequestError when there is no such file.
    """
    path = os.fspath(source)
    content = read_bytes(path)
    name = "standard input" if path == "-" else path
    return case_from_tree(parse_text(content, name), name, hashlib.sha256(content).hexdigest())


def case_from_tree(tree: Mapping[str, Any], source: str = "case", sha256: str = "") -> Case:
    """Return the case that a tree of plain values states, the same tree as TOML and JSON give.

    Raises CaseError with all complaints about it.
    """
    findings = Findings()
    try:
        base = draft(tree, findings, source)
        check(base, findings)
        check_file(base, findings)
        complaints = list(findings.errors(tree))
        complaints += check_scenarios(base, complaints)
    except RecursionError:
        raise CaseError(["the tables are nested too deeply"], source) from None
    if complaints:
        raise CaseError(complaints, source)
    return msgspec.structs.replace(base.case, sha256=sha256, warnings=findings.warnings(tree))

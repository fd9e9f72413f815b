"""Options of the test run."""

import pytest
from hypothesis import settings

EXAMPLES = 300


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption(
        "--referee-examples",
        type=int,
        default=None,
        help=f"random networks judged by the referee, drawn anew (default: the same {EXAMPLES} each time)",
    )


def pytest_configure(config: pytest.Config) -> None:
    wanted = config.getoption("--referee-examples")
    same = wanted is None  # the default run draws the same examples every time
    many = EXAMPLES if wanted is None else wanted
    settings.register_profile("referee", max_examples=many, deadline=None, derandomize=same)
    settings.register_profile("anywhere", max_examples=max(1, many // 2), deadline=None, derandomize=same)
    settings.register_profile("seqfault", deadline=None, derandomize=same)
    settings.load_profile("seqfault")

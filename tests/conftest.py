"""Options of the test run."""

import pytest
from hypothesis import settings


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption(
        "--referee-examples",
        type=int,
        default=300,
        help="random networks that are judged by the referee (default 300)",
    )


def pytest_configure(config: pytest.Config) -> None:
    settings.register_profile("referee", max_examples=config.getoption("--referee-examples"), deadline=None)
    few = max(1, config.getoption("--referee-examples") // 2)
    settings.register_profile("anywhere", max_examples=few, deadline=None)
    settings.register_profile("seqfault", deadline=None)
    settings.load_profile("seqfault")

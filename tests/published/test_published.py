"""Every published figure, and the page that lists them."""

import pytest

from tests.published.validation import EXAMPLES, PAGE, page


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda example: example.title[:60])
def test_figures(example):
    worst = [
        f"{figure.quantity}: published {figure.published} {figure.unit}, got {figure.got():.8g}"
        for figure in example.figures
        if not figure.error() <= figure.tolerance
    ]
    assert not worst, f"{example.source}\n" + "\n".join(worst)


def test_the_validation_page_is_up_to_date():
    assert PAGE.read_text(encoding="utf-8") == page()

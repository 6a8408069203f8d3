"""Tools for the published check values."""

from __future__ import annotations

from collections.abc import Callable
from decimal import Decimal
from typing import Any

import pytest


@pytest.fixture(scope="session")
def printed() -> Callable[[str], Any]:
    """Compare with a number as printed: half a unit of its last digit is allowed, no more."""

    def approx(text: str) -> Any:
        number = Decimal(text)
        last_digit = 10.0 ** int(number.as_tuple().exponent)
        return pytest.approx(float(number), abs=0.501 * last_digit, rel=0)

    return approx

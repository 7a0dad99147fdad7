"""Units of what is charted."""

import pytest

from monitor.units import of_chart


@pytest.mark.parametrize(
    ("unit", "squared"),
    [("g", "g²"), ("mm", "mm²"), ("N·m", "(N·m)²"), ("°C", "°C²"), ("m/s", "(m/s)²"), ("", "")],
)
def test_a_variance_is_in_the_unit_squared(unit: str, squared: str) -> None:
    assert of_chart("variance", unit) == squared
    assert of_chart("sd", unit) == of_chart("mean", unit) == unit

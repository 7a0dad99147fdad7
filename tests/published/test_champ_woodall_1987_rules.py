"""Average run lengths of Shewhart charts with supplementary runs rules, C. W. Champ & W. H. Woodall
1987, Technometrics 29, table 1: rule 1 outside 3, 2 two of three beyond 2, 3 four of five beyond 1,
4 a run of eight. Values from memory.
"""

import pytest

from monitor.methods.runlength.rules import run_length
from monitor.plan import RulePlan

RULES = {
    "1": RulePlan("outside", width=3),
    "2": RulePlan("zone", width=2, count=2, of=3),
    "3": RulePlan("zone", width=1, count=4, of=5),
    "4": RulePlan("run", length=8),
}
SHIFTS = (0, 0.2, 0.4, 0.6, 0.8, 1.0, 1.2)
PRINTED = {
    "1": (370.40, 308.43, 200.08, 119.67, 71.55, 43.89, 27.82),
    "12": (225.44, 177.56, 104.46, 57.92, 33.12, 20.01, 12.81),
    "13": (166.05, 120.70, 63.88, 33.99, 19.78, 12.66, 8.84),
    "14": (152.73, 110.52, 59.76, 33.64, 21.07, 14.58, 10.90),
    "123": (132.89, 97.86, 52.93, 28.70, 16.93, 10.95, 7.68),
    "124": (122.05, 89.14, 48.71, 27.49, 17.14, 11.73, 8.61),
    "134": (105.78, 76.01, 40.95, 23.15, 14.62, 10.19, 7.66),
    "1234": (91.75, 66.80, 36.61, 20.90, 13.25, 9.22, 6.89),
}


@pytest.mark.parametrize("which", PRINTED)
def test_to_the_printed_digits(which: str) -> None:
    rules = [RULES[name] for name in which]
    computed = [run_length(rules, shift) for shift in SHIFTS]
    assert computed == pytest.approx(PRINTED[which], abs=0.0101)

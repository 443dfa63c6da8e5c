"""Printed figures: interest tables and cost tables of solar stills, to their printed digits."""

from __future__ import annotations

import pytest

from stillfield.decisions.cost import (
    Part,
    StillCost,
    annual_cost,
    capital_recovery_factor,
    cost_per_litre,
    sinking_fund_factor,
)

#: Years, A/F, A/P at 0.25 %: Blank & Tarquin, interest factor tables, Table 1 (page 388).
QUARTER_PERCENT = [
    (1, "1.00000", "1.00250"), (2, "0.49938", "0.50188"), (3, "0.33250", "0.33500"), (4, "0.24906", "0.25156"),
    (5, "0.19900", "0.20150"), (6, "0.16563", "0.16813"), (7, "0.14179", "0.14429"), (8, "0.12391", "0.12641"),
    (9, "0.11000", "0.11250"), (10, "0.09888", "0.10138"), (15, "0.06551", "0.06801"), (20, "0.04882", "0.05132"),
    (25, "0.03881", "0.04131"),
]  # fmt: skip

#: Years, A/F, A/P at 35 %: Newnan, Engineering Economic Analysis, compound interest tables.
THIRTY_FIVE_PERCENT = [
    (2, "0.4255", "0.7755"), (3, "0.2397", "0.5897"), (4, "0.1508", "0.5008"), (5, "0.1005", "0.4505"),
    (10, "0.0183", "0.3683"), (15, "0.00393", "0.3539"), (20, "0.00087", "0.3509"), (25, "0.00019", "0.3502"),
]  # fmt: skip

#: Interest [%], years, A/P, A/F as every interest table prints them (quoted from memory).
USUAL = [(8, 10, "0.14903", "0.06903"), (12, 10, "0.17698", "0.05698"), (10, 15, "0.13147", "0.03147"),
         (5, 20, "0.08024", "0.03024"), (10, 10, "0.16275", "0.06275")]  # fmt: skip


def printed(value, like):
    """`value` with as many decimals as the printed text."""
    return f"{float(value):.{len(like.partition('.')[2])}f}"


@pytest.mark.parametrize(
    ("percent", "years", "sinking", "recovery"),
    [(0.25, *row) for row in QUARTER_PERCENT]
    + [(35, *row) for row in THIRTY_FIVE_PERCENT]
    + [(percent, years, sinking, recovery) for percent, years, recovery, sinking in USUAL],
)
def test_factors_are_those_of_the_interest_tables(percent, years, sinking, recovery):
    assert printed(sinking_fund_factor(percent / 100, years), sinking) == sinking
    assert printed(capital_recovery_factor(percent / 100, years), recovery) == recovery


#: Plain inclined still and five wicks: capital, annual yield [L], then as printed FAC, ASV, AMC, AC and CPL [USD].
#: Scientific Reports 2025, doi 10.1038/s41598-025-18295-1, Table 4; life 15 years, interest 10 %. The salvage value
#: it prints is 20 % of the capital and its maintenance 15 % of FAC.
WICKS = [
    ("plain", 115.0, 990.90, "15.12", "0.72", "2.27", "16.66", "0.0168"),
    ("flannel", 116.0, 1253.10, "15.25", "0.73", "2.29", "16.81", "0.0134"),
    ("cotton", 117.0, 1230.30, "15.38", "0.74", "2.31", "16.95", "0.0138"),
    ("coconut coir", 117.0, 1296.90, "15.38", "0.74", "2.31", "16.95", "0.0131"),
    ("jute", 116.0, 1180.80, "15.25", "0.73", "2.29", "16.81", "0.0142"),
    ("polypropylene", 116.0, 1143.00, "15.25", "0.73", "2.29", "16.81", "0.0147"),
]


@pytest.mark.parametrize("row", WICKS, ids=lambda row: row[0])
def test_a_published_cost_table_is_reproduced(row):
    _, capital, litres, recovery, salvage, maintenance, total, per_litre = row
    cost = StillCost((Part("still", capital, 15.0, salvage_share=0.20),), interest=0.10, maintenance_share=0.15)
    year = annual_cost(cost)
    assert printed(year.recovery, recovery) == recovery
    assert printed(year.salvage, salvage) == salvage
    assert printed(year.maintenance, maintenance) == maintenance
    assert printed(year.total, total) == total
    assert printed(cost_per_litre(year.total, litres), per_litre) == per_litre


#: Litres a day as the same table prints them. Its annual yields are these times 300.
DAILY = [3.30, 4.18, 4.10, 4.32, 3.94, 3.81]


@pytest.mark.parametrize(("row", "daily"), list(zip(WICKS, DAILY, strict=True)), ids=str)
def test_300_working_days_are_an_availability(row, daily):
    cost = StillCost((Part("still", row[1], 15.0, salvage_share=0.20),), interest=0.10, maintenance_share=0.15)
    assert f"{row[2] / 300:.2f}" == f"{daily:.2f}"
    assert printed(cost_per_litre(annual_cost(cost).total, daily * 365, 300 / 365), row[-1]) == row[-1]

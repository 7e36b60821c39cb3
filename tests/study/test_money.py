"""Money over a life: against cash flows written out, published factors and each other."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from yieldsim.study import money


@pytest.mark.parametrize(
    ("rate", "years", "factor"), [(0.05, 30, 15.3725), (0.08, 20, 9.8181), (0.10, 25, 9.0770), (0.03, 25, 17.4131)]
)
def test_published_factors(rate, years, factor):
    """Reference: uniform present worth factors as tabulated to four digits, e.g. in NIST Handbook 135, Life-Cycle
    Costing Manual, and in NREL/TP-462-5173 (from memory; the tables round to the last digit)."""
    assert money.present_worth_of_one(rate, years) == pytest.approx(factor, abs=5.1e-5)


# HELP below: LibreOffice 7.4 Help, the manual of a spreadsheet (The Document Foundation; Debian package
# libreoffice-help-en-us 7.4.7), chapter Financial Functions: worked examples, amounts rounded to cents.


def test_worked_example_of_an_annuity():
    """Reference: HELP, PMT: 25,000 at 1.99 % a year over 36 months take 715.96 a month."""
    rate = 0.0199 / 12
    assert 25_000 * money.capital_recovery(rate, 36) == pytest.approx(715.96, abs=0.005)
    assert 715.96 * money.present_worth_of_one(rate, 36) == pytest.approx(25_000, abs=0.005 * 36)


def test_worked_example_of_a_net_present_value():
    """Reference: HELP, NPV: 10, 20 and 30 at 8.75 % are worth 49.43, and 9.43 after costs of 40 at the start."""
    worth = money.present_value([10.0, 20.0, 30.0], 0.0875)
    assert worth == pytest.approx(49.43, abs=0.005)
    assert money.net_present_value(worth, 0.0, 40.0, money.present_worth_of_one(0.0875, 3)) == pytest.approx(
        9.43, abs=0.005
    )


def test_worked_example_of_a_present_value():
    """Reference: HELP, PV: 500 a month for 48 months at 8 % a year and 20,000 at the end are worth 35,019.37."""
    flows = np.full(48, 500.0)
    flows[-1] += 20_000
    assert money.present_value(flows, 0.08 / 12) == pytest.approx(35_019.37, abs=0.005)


def test_worked_example_of_a_project():
    """Reference: Brealey, Myers, Allen, Principles of Corporate Finance (13th ed.), section 2.1: an office block of
    370,000, sold for 420,000 a year later, has a net present value of 30,000 at 5 % (seen as the tests of the PyPI
    package financialkit 0.1.0 quote it)."""
    worth = money.present_value([420_000.0], 0.05)
    assert money.net_present_value(worth, 0.0, 370_000.0, money.present_worth_of_one(0.05, 1)) == pytest.approx(30_000)


def test_a_loan_paid_by_what_is_made():
    """Reference: HELP, PMT, as above: makes a plant 100 units a month and costs 84.04 to run, a unit costs 8.00."""
    worth = money.present_worth_of_one(0.0199 / 12, 36)
    assert money.cost_of_energy(100.0 * worth, 84.04, 25_000.0, worth) == pytest.approx(8.00, abs=5e-5)


def test_levelised_cost():
    """Reference: the levelised cost of the manual NREL/TP-462-5173 (Short, Packey, Holt 1995): LCOE = TLCC x UCRF / Q
    where TLCC is capital plus the present value of yearly costs (formula from memory, amounts ours): 100 000 of
    capital, 1 500 a year, 90 000 kWh a year, 20 years at 8 %: (100000 + 1500 x 9.8181) x 0.101852 / 90000."""
    worth = money.present_worth_of_one(0.08, 20)
    found = money.cost_of_energy(90_000.0 * worth, 1_500.0, 100_000.0, worth)
    assert found == pytest.approx((100_000 + 1_500 * 9.8181) * 0.101852 / 90_000, rel=2e-5)  # four-digit factors
    assert money.capital_recovery(0.08, 20) == pytest.approx(0.101852, abs=5.1e-7)


@given(
    rate=st.floats(-0.3, 0.6), growth=st.floats(-0.15, 0.1), years=st.integers(1, 60), revenue=st.floats(0, 1e6),
    cost=st.floats(0, 1e5), capital=st.floats(0, 1e7),
)  # fmt: skip
def test_cash_flows_written_out(rate, growth, years, revenue, cost, capital):
    """Closed form against a loop over the years."""
    sales = [revenue * (1 + growth) ** n for n in range(years)]
    written = sum((sold - cost) / (1 + rate) ** (n + 1) for n, sold in enumerate(sales)) - capital
    output, costs = money.present_worth_of_one(rate, years, growth), money.present_worth_of_one(rate, years)
    scale = revenue * output + cost * costs + capital + 1.0
    found = money.net_present_value(revenue * output, cost, capital, costs)
    assert found == pytest.approx(written, abs=1e-9 * scale)
    assert money.present_value(sales, rate) == pytest.approx(revenue * output, abs=1e-9 * scale)


@pytest.mark.parametrize("rate", [0.0, 1e-15, 1e-9, 0.04])
def test_a_rate_equal_to_the_growth_is_no_pole(rate):
    """Closed form: N/(1 + r)."""
    assert money.present_worth_of_one(rate, 30, rate) == pytest.approx(30 / (1 + rate), rel=1e-9)
    near = money.present_worth_of_one(rate + 1e-9, 30, rate)
    assert near == pytest.approx(30 / (1 + rate), rel=1e-6)


def test_the_cost_of_energy_as_price_is_worth_nothing():
    """Definition: sold at its cost, energy leaves a net present value of zero."""
    output, costs = money.present_worth_of_one(0.06, 25, -0.005), money.present_worth_of_one(0.06, 25)
    price = money.cost_of_energy(1200.0 * output, 15.0, 900.0, costs)
    value = money.net_present_value(1200.0 * output * price, 15.0, 900.0, costs)
    assert value == pytest.approx(0.0, abs=1e-9)


def test_energy_that_is_not_there_has_no_finite_cost():
    assert money.cost_of_energy(0.0, 15.0, 900.0, 10.0) == np.inf
    found = money.cost_of_energy(np.array([0.0, 100.0]), 10.0, 900.0, 10.0)
    assert list(found) == [np.inf, 10.0]


def test_arrays_and_bad_numbers():
    flows = np.array([[1.0, 1.0, 1.0], [0.0, 0.0, 2.0]])
    assert money.present_value(flows, 0.1) == pytest.approx([2.486852, 2 / 1.331], abs=5e-7)  # six-digit factor
    found = money.present_worth_of_one(np.array([0.05, 0.08]), np.array([30, 20]))
    assert found == pytest.approx([15.3725, 9.8181], abs=5.1e-5)
    for bad in ((-1.0, 10, 0.0), (0.05, 0, 0.0), (0.05, 10, -1.0)):
        with pytest.raises(ValueError, match=r"-1 or less|below one year"):
            money.present_worth_of_one(*bad)

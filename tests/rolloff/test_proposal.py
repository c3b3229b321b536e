"""Proposals: complete, ordered, honest about themselves, and reproduced by the lines a user pastes."""

from __future__ import annotations

import tomllib
from fractions import Fraction

from hypothesis import given
from hypothesis import strategies as st

from realize.quantity import parse_quantity
from realize.rolloff import PAIR_DAMPING, circumstances, proposal_for, proposals, rolloff_toml
from realize.transfer import TransferFunction
from tests.rolloff.designs import BAND_RAD_S, CUBIC, LAG, PID, improper, settings_around, window

F = Fraction


@given(improper(), st.data())
def test_proposals_are_proper_ordered_and_honest(transfer: TransferFunction, data: st.DataObject) -> None:
    around = data.draw(settings_around(transfer))
    found = proposals(transfer, around)
    excess = -transfer.relative_degree
    shapes = {(order, F(1)) for order in (excess, excess + 1)} | ({(2, PAIR_DAMPING)} if excess <= 2 else set())
    assert {(p.placement, p.order, p.damping) for p in found} == {
        (placement, *shape) for placement in ("derivative", "whole") for shape in shapes
    }
    ranks = [(not p.within_window, p.order, p.placement == "whole", p.damping != 1) for p in found]
    assert ranks == sorted(ranks)
    for price in found:
        assert price.relative_degree >= 0
        assert price.within_window is (price.window_rad_s is not None)
        if price.window_rad_s is not None:
            low, high = window(price)
            assert low * (1 - 1e-9) <= price.pole_rad_s <= high * (1 + 1e-9)
            assert price.phase_lost_deg is None or price.phase_lost_deg <= around.phase_budget_deg + F(1, 10**6)
            if price.converter_step_percent is not None:
                assert price.converter_step_percent <= 5 * (1 + 1e-6)


def test_the_default_order_is_as_many_poles_as_make_it_proper() -> None:
    assert proposal_for(CUBIC, circumstances(CUBIC)).order == 3


def test_a_proper_transfer_function_gets_no_proposals() -> None:
    assert proposals(LAG, circumstances(LAG)) == ()


@given(improper(), st.data())
def test_pasted_lines_reproduce_the_proposal(transfer: TransferFunction, data: st.DataObject) -> None:
    around = data.draw(settings_around(transfer))
    for price in proposals(transfer, around):
        table = tomllib.loads(rolloff_toml(price), parse_float=F)["rolloff"]
        budget = parse_quantity(table.get("phase_budget", "6 deg"), "angle", "[rolloff]")
        again = proposal_for(
            transfer,
            around._replace(phase_budget_deg=budget),
            placement=table["placement"],
            order=table["order"],
            damping=F(table.get("damping", 1)),
            pole_rad_s=parse_quantity(table["pole"], "angular frequency", "[rolloff]"),
        )
        assert again == price


def test_pasted_lines_hold_the_table_in_full() -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S, phase_budget_deg=F("7.5"))
    price = proposal_for(PID, around, placement="whole", order=2, damping=PAIR_DAMPING, pole_rad_s=F("1999.25"))
    assert rolloff_toml(price).splitlines() == [
        "[rolloff]",
        'placement = "whole"',
        "order = 2",
        "damping = 0.7071",
        'pole = "1999.25 rad/s"',
        'phase_budget = "7.5 deg"',
    ]

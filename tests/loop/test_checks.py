"""The loop checks: what they compare, what they let pass, and what they say."""

from __future__ import annotations

from fractions import Fraction
from math import degrees

import pytest

from realize.checks import Check
from realize.loop import (
    LOOP_DEFAULTS,
    ContinuousLoop,
    LoopFigures,
    LoopReference,
    MeasuredLoop,
    MeasuredPlant,
    MeasuredResponse,
    Plant,
    continuous_step,
    loop_checks,
    loop_entry,
    measured_loop_checks,
    worst_case,
)
from realize.methods import discretize
from realize.transfer import TransferFunction
from tests.loop.loops import transfer

NAMES = ("loop stability", "loop phase margin", "loop sensitivity", "loop overshoot")

LEAD = transfer("0.8 2", "0.04 1")
SERVO = transfer("1", "0.5 1 0")


def _checks(
    controller: TransferFunction = LEAD,
    plant: TransferFunction = SERVO,
    period: str = "0.01",
    method: str = "bilinear",
    given: dict[str, Fraction] | None = None,
    case: str = "",
) -> dict[str, Check]:
    period_s = Fraction(period)
    reference = LoopReference(controller, Plant(plant, case=case), period_s, period_s)
    sampled = reference.sampled(discretize(controller, period_s, method).pulse)
    found = loop_checks(reference, sampled, "exact", given or {})
    assert tuple(check.check for check in found) == NAMES
    return {check.check: check for check in found}


def _verdicts(checks: dict[str, Check]) -> list[str]:
    return [checks[name].verdict for name in NAMES]


def test_a_good_loop_is_within_everywhere() -> None:
    assert _verdicts(_checks()) == ["within"] * 4


def test_the_case_is_named_in_every_reason() -> None:
    assert all(check.reason.startswith("case heavy roller: ") for check in _checks(case="heavy roller").values())


def test_an_unstable_loop_is_out_everywhere() -> None:
    checks = _checks(period="2")
    assert _verdicts(checks) == ["out"] * 4
    assert checks["loop stability"].obtained == "unstable"
    assert checks["loop stability"].difference == 1


def _figure(value: object) -> float:
    assert isinstance(value, float)
    return value


def test_a_lag_of_the_method_costs_half_a_period_of_phase() -> None:
    """An integral converted step-invariantly lags by ``wT/2`` more: at 0.5 rad/s and 0.2 s 2.9 deg."""
    integral, lag = transfer("0.6", "1 0"), transfer("1", "1 1")
    one, other = (_checks(integral, lag, "0.2", m)["loop phase margin"] for m in ("bilinear", "step-invariant"))
    w = _figure(LoopReference(integral, Plant(lag), Fraction("0.2"), Fraction(0)).continuous.margins.crossover_rad_s)
    assert _figure(other.difference) - _figure(one.difference) == pytest.approx(degrees(w * 0.1), abs=0.1)


def test_the_room_of_the_phase_margin_ends_at_the_floor() -> None:
    """A floor three degrees below the loop with hold and delay leaves three, not five, to lose."""
    reference = _figure(_checks()["loop phase margin"].reference)
    check = _checks(given={"loop_phase_margin_least": Fraction(reference) - 3})["loop phase margin"]
    assert check.tolerance == pytest.approx(3)
    assert check.verdict == "within"


def test_a_reference_below_the_floor_leaves_only_the_floor() -> None:
    check = _checks(given={"loop_phase_margin_least": Fraction(80)})["loop phase margin"]
    assert check.verdict == "out"
    assert check.difference == pytest.approx(80 - _figure(check.obtained))
    assert "does not reach itself" in check.reason


def test_sensitivity_has_a_limit_of_its_own() -> None:
    check = _checks(given={"loop_sensitivity_most": Fraction("1.05")})["loop sensitivity"]
    assert check.verdict == "out"
    assert "at most 1.05" in check.reason
    usual = _checks()["loop sensitivity"]
    assert usual.tolerance == pytest.approx(2 - _figure(usual.reference))


def test_overshoot_is_compared_with_hold_and_delay_in_the_loop() -> None:
    check = _checks(period="0.05")["loop overshoot"]
    delayed = ContinuousLoop(LEAD, Plant(SERVO), hold_s=Fraction("0.05"), compute_delay_s=Fraction("0.05"))
    step = continuous_step(delayed)
    assert step is not None
    assert check.reference == step.overshoot_percent
    assert check.difference == max(0.0, _figure(check.obtained) - step.overshoot_percent)


def test_overshoot_is_undefined_without_a_final_value() -> None:
    check = _checks(controller=transfer("1 0", "0.1 1"), plant=transfer("1", "0.5 1.5 1"))["loop overshoot"]
    assert check.verdict == "undefined"
    assert "no final value other than 0" in check.reason


def test_a_reference_that_is_not_stable_leaves_only_the_floor() -> None:
    """A second of compute delay more than the sampled loop is given: the loop to compare with is lost."""
    period = Fraction(1, 100)
    late, prompt = (
        LoopReference(transfer("4", "1"), Plant(SERVO), period, delay) for delay in (Fraction(1), Fraction(0))
    )
    sampled = prompt.sampled(discretize(transfer("4", "1"), period, "bilinear").pulse)
    checks = {check.check: check for check in loop_checks(late, sampled, "exact", {})}
    assert checks["loop stability"].verdict == "within"
    assert checks["loop phase margin"].reference is None
    assert checks["loop phase margin"].verdict == "within"
    assert checks["loop overshoot"].verdict == "undefined"


def test_the_worst_case_is_the_one_that_is_out_or_uses_most() -> None:
    light, heavy = (_checks(plant=transfer("1", f"{j} 1 0"), period="0.05") for j in ("0.1", "1"))
    for name in NAMES[1:]:
        worst = worst_case([light[name], heavy[name]])
        assert worst in (light[name], heavy[name])
        if light[name].verdict != heavy[name].verdict:
            assert worst.verdict == "out"
    within, out = _checks()["loop stability"], _checks(period="2")["loop stability"]
    assert worst_case([within, out, within]) is out


def test_the_keys_of_a_loop_are_those_scripts_rely_on() -> None:
    period = Fraction(1, 100)
    reference = LoopReference(LEAD, Plant(SERVO, case="nominal"), period, period)
    entry = loop_entry(reference, reference.sampled(discretize(LEAD, period, "bilinear").pulse))
    assert list(entry) == ["case", "continuous", "discrete"]
    keys = [
        "stable",
        "phase_margin_deg",
        "gain_margin_db",
        "gain_reduction_margin_db",
        "delay_margin_s",
        "crossover_rad_s",
        "maximum_sensitivity",
        "step_overshoot_percent",
    ]
    for kind in ("continuous", "discrete"):
        figures = entry[kind]
        assert isinstance(figures, dict)
        assert list(figures) == keys
        assert figures["stable"] is True


def test_a_measured_plant_leaves_stability_and_step_undefined() -> None:
    response = MeasuredResponse([0.01, 0.1, 1.0, 10.0], [20.0, 0.0, -20.0, -40.0], [-90.0, -90.0, -90.0, -90.0])
    plant = MeasuredPlant(response, case="bench")
    pulse = discretize(transfer("1", "1"), Fraction(1, 100), "bilinear").pulse
    delayed = LoopFigures(MeasuredLoop(transfer("1", "1"), plant, hold_s=0.01))
    sampled = LoopFigures(MeasuredLoop(pulse, plant, hold_s=0.01))
    checks = measured_loop_checks(delayed, sampled, "bench", "stored", {})
    assert [c.verdict for c in checks] == ["undefined", "within", "within", "undefined"]
    assert sampled.document()["stable"] is None


def test_defaults_are_those_of_the_design_page() -> None:
    assert {key: float(default.tolerance) for key, default in LOOP_DEFAULTS.items()} == {
        "loop_phase_margin_loss": 5,
        "loop_phase_margin_least": 30,
        "loop_sensitivity_most": 2,
        "loop_overshoot_rise": 2,
    }

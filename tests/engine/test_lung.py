"""What is believed about one lung: breathing read off the chart, priors, drift, the gas it gives."""

from dataclasses import replace
from datetime import UTC, datetime, timedelta

import numpy as np
import pytest

from engine.lung import (
    Belief,
    Breathing,
    arterial_gas,
    breathing_at,
    drift_between,
    gas_on_the_way,
    own_rate_of,
    prior_of,
    settled_gas,
    ventilation,
)
from engine.lung.arterial import FASTEST_PER_MIN, LARGEST_SERIES_SHARE, TRAPPING_MOST
from engine.lung.breathing import EXCHANGER_ML, apparatus_dead_space_ml, last_settings
from engine.lung.drift import EVENT, EVIDENCE, TAIL, heavy_tail
from engine.lung.prior import INDEX, PARAMETERS
from engine.physics.mechanics import predicted_body_weight_kg
from engine.physics.stores import paco2_on_the_way_mmhg
from engine.record import EVENTS, BloodGas, Case, Entry, Measured, Patient, Settings

START = datetime(2031, 3, 4, 7, 0, tzinfo=UTC)
HOUR = timedelta(hours=1)
MAN = Patient(sex="male", height_cm=175, weight_kg=72)
FIRST = Settings(mode="volume", rate_per_min=16, tidal_volume_ml=440, fio2=0.5, peep_cmh2o=8)
ROUNDING = 1e-9
GAS = BloodGas(ph=7.38, paco2_mmhg=42.0, pao2_mmhg=85.0, hb_g_per_dl=11.0)


def case_of(*entries: Entry) -> Case:
    return Case(label="Bed 7", patient=MAN, entries=entries)


def charted(measured: Measured | None = None, *, settings: Settings = FIRST, events=()) -> Case:
    return case_of(Entry(time=START, settings=settings, measured=measured, events=events))


def breathing_of(case: Case, **tried: object) -> Breathing:
    return breathing_at(case, replace(last_settings(case), **tried))


# Breathing, read off the chart


@pytest.mark.parametrize(
    ("total", "triggering", "per_min", "at_most"),
    [
        (16, False, None, 16),
        (17, False, None, 16),  # a breath more fits into any minute
        (18, True, 18, 18),
        (28, True, 28, 28),
        (12, False, None, 12),
    ],
)
def test_a_total_rate_above_the_set_one_is_the_patient(total, triggering, per_min, at_most):
    own = own_rate_of(charted(Measured(total_rate_per_min=total)))
    assert (own.triggering, own.per_min, own.at_most_per_min, own.charted) == (
        triggering,
        per_min,
        at_most,
        True,
    )


def test_without_a_total_rate_the_own_rate_is_at_most_the_set_one():
    own = own_rate_of(charted())
    assert (own.per_min, own.at_most_per_min, own.charted) == (None, 16, False)


def test_the_last_total_rate_counts_beside_the_set_rate_of_its_time():
    case = charted(Measured(total_rate_per_min=24))
    raised = replace(
        case, entries=(*case.entries, Entry(time=START + HOUR, settings=Settings(rate_per_min=26)))
    )
    assert (
        own_rate_of(raised).per_min == 24
    )  # 24 beside a set 16 were the patient's own, whatever is set later
    after = Entry(time=START + 2 * HOUR, measured=Measured(total_rate_per_min=26))
    assert not own_rate_of(replace(raised, entries=(*raised.entries, after))).triggering


def test_paralysis_ends_the_own_rate_until_it_is_over():
    case = charted(Measured(total_rate_per_min=24))
    paralysed = replace(case, entries=(*case.entries, Entry(time=START + HOUR, events=("paralysis",))))
    assert own_rate_of(paralysed).at_most_per_min == 0
    over = Entry(time=START + 2 * HOUR, events=("paralysis_end",))
    assert own_rate_of(replace(paralysed, entries=(*paralysed.entries, over))).per_min == 24


@pytest.mark.parametrize(
    ("settings", "exhaled", "tried", "volume_ml", "is_charted"),
    [
        (FIRST, 400, {}, 440, True),  # in volume control the set volume rules
        (FIRST, None, {"tidal_volume_ml": 380.0}, 380, True),
        (replace(FIRST, mode="pressure", inspiratory_pressure_cmh2o=14), 400, {}, 400, True),
        (replace(FIRST, mode="pressure"), None, {}, 440, True),  # nothing exhaled charted: the last set one
        (
            replace(FIRST, mode="pressure", inspiratory_pressure_cmh2o=14),
            400,
            {"inspiratory_pressure_cmh2o": 7.0},
            200,  # half of the pressure, half of the volume
            False,
        ),
        (
            replace(FIRST, mode="support", support_pressure_cmh2o=10),
            400,
            {"support_pressure_cmh2o": 12.0},
            480,
            False,
        ),
    ],
)
def test_the_volume_that_rules(settings, exhaled, tried, volume_ml, is_charted):
    case = charted(None if exhaled is None else Measured(exhaled_tidal_volume_ml=exhaled), settings=settings)
    found = breathing_of(case, **tried)
    assert found.tidal_volume_ml == pytest.approx(volume_ml)
    assert found.tidal_volume_charted is is_charted


@pytest.mark.parametrize(
    ("settings", "volume_ml"),
    [
        (Settings(), 0.0),
        (Settings(humidifier="heated"), 0.0),
        (Settings(humidifier="exchanger"), EXCHANGER_ML),
        (Settings(humidifier="exchanger", apparatus_dead_space_ml=80.0), 80.0),
        (Settings(humidifier="heated", apparatus_dead_space_ml=15.0), 15.0),
    ],
)
def test_device_volume_as_charted_else_by_the_humidifier(settings, volume_ml):
    assert apparatus_dead_space_ml(settings) == volume_ml


# Priors


def prior_for(patient: Patient, case: Case | None = None):
    return prior_of(patient, breathing_of(case or charted()), -3.0)


def test_a_prior_scales_with_predicted_body_weight():
    small, large = (prior_for(Patient(sex="female", height_cm=cm)) for cm in (150, 185))
    ratio = float(predicted_body_weight_kg("female", 185) / predicted_body_weight_kg("female", 150))
    for name in ("ln_series_ml", "ln_vco2", "ln_cardiac_output"):
        assert large.centre[INDEX[name]] - small.centre[INDEX[name]] == pytest.approx(np.log(ratio))
    assert large.centre[INDEX["logit_shunt"]] == small.centre[INDEX["logit_shunt"]]


@pytest.mark.parametrize("patient", [Patient(), Patient(sex="male"), Patient(height_cm=170)])
def test_an_unknown_body_is_wider_and_no_error(patient):
    known, unknown = prior_for(MAN), prior_for(patient)
    for name in ("ln_series_ml", "ln_vco2", "ln_cardiac_output"):
        assert unknown.width[INDEX[name]] > known.width[INDEX[name]]
    assert unknown.width[INDEX["logit_shunt"]] == known.width[INDEX["logit_shunt"]]


def test_base_excess_is_centred_on_the_gas():
    assert prior_for(MAN).centre[INDEX["standard_base_excess"]] == -3.0


def test_obstructive_disease_means_more_spread_and_less_shunt():
    plain, sick = prior_for(MAN), prior_for(replace(MAN, conditions=("obstructive",)))
    assert sick.centre[INDEX["ln_vq_log_sd"]] > plain.centre[INDEX["ln_vq_log_sd"]]
    assert sick.centre[INDEX["logit_shunt"]] < plain.centre[INDEX["logit_shunt"]]


def test_who_takes_part_in_the_breathing():
    """Paralysed: no. Seen passive: seldom. Unknown: likely. Triggering or supported: nearly surely."""
    supported = charted(Measured(total_rate_per_min=16), settings=replace(FIRST, mode="support"))
    chances = [
        prior_for(MAN, case).active
        for case in (
            charted(events=("paralysis",)),
            charted(Measured(total_rate_per_min=16)),
            charted(),
            charted(Measured(total_rate_per_min=28)),
        )
    ]
    assert chances[0] == 0.0
    assert chances == sorted(chances) and chances[-1] < 1.0
    assert prior_for(MAN, supported).active == chances[-1]


# Drift


def belief_of(draws: int = 4, *, active: bool = False, own: float = 0.5, **numbers: float) -> Belief:
    """Draws all alike: the centre of the prior but for the numbers given."""
    centre = prior_for(MAN).centre.copy()
    for name, value in numbers.items():
        centre[INDEX[name]] = value
    return Belief(np.tile(centre, (draws, 1)), np.full(draws, active), np.full(draws, own))


def drift(belief: Belief, *entries: Entry, hours: float = 3.0, tail: float = 1.0, read_as: str = "seen"):
    return drift_between(belief, entries, FIRST, hours, np.full(len(belief), tail), read_as=read_as)


def test_drift_grows_with_time_tail_and_volatility_and_is_larger_in_an_active_patient():
    base = drift(belief_of()).sd
    assert np.all(drift(belief_of(), hours=12.0).sd >= base)
    np.testing.assert_allclose(drift(belief_of(), tail=2.0).sd, 2.0 * base)
    np.testing.assert_allclose(drift(belief_of(ln_volatility=np.log(3.0))).sd, 3.0 * base)
    active = drift(belief_of(active=True)).sd
    assert np.all(active >= base) and np.any(active > base)


def test_what_lies_in_a_step_adds_up_as_the_square_root_of_time():
    four, one = drift(belief_of(), hours=4.0).sd, drift(belief_of(), hours=1.0).sd
    jump = drift(belief_of(), hours=0.0).sd
    np.testing.assert_allclose(four**2 - jump**2, 4.0 * (one**2 - jump**2), atol=ROUNDING)


@pytest.mark.parametrize("event", sorted(EVENT))
def test_an_event_widens_what_it_touches_and_nothing_else(event):
    assert event in EVENTS
    plain = drift(belief_of()).sd
    after = drift(belief_of(), Entry(time=START, events=(event,))).sd
    for name in PARAMETERS:
        expected = np.hypot(plain[:, INDEX[name]], EVENT[event].get(name, 0.0))
        np.testing.assert_allclose(after[:, INDEX[name]], expected, err_msg=name)


def test_a_peep_change_counts_once_charted_as_event_or_setting_or_both():
    by_setting, by_event, by_both = (
        drift(belief_of(), entry).sd
        for entry in (
            Entry(time=START, settings=Settings(peep_cmh2o=12)),
            Entry(time=START, events=("peep_change",)),
            Entry(time=START, settings=Settings(peep_cmh2o=12), events=("peep_change",)),
        )
    )
    np.testing.assert_array_equal(by_setting, by_event)
    np.testing.assert_array_equal(by_setting, by_both)


def test_pure_oxygen_widens_shunt():
    assert shunt_sd(Settings(fio2=1.0)) > shunt_sd(Settings(fio2=0.95))


def shunt_sd(step: Settings, reason: str = "procedure") -> float:
    return float(
        drift(belief_of(), Entry(time=START, settings=step, change_reason=reason)).sd[0, INDEX["logit_shunt"]]
    )


@pytest.mark.parametrize("fio2", [0.35, 0.7])
def test_a_charted_step_of_fio2_is_news_when_seen_and_none_when_done(fio2):
    step = Entry(time=START, settings=Settings(fio2=fio2))
    seen, done = (drift(belief_of(), step, read_as=read_as) for read_as in ("seen", "done"))
    np.testing.assert_allclose(seen.shift[:, INDEX["logit_shunt"]], EVIDENCE * (fio2 - FIRST.fio2))
    assert not done.shift.any()
    assert np.all(seen.sd[:, INDEX["logit_shunt"]] > done.sd[:, INDEX["logit_shunt"]])
    others = [INDEX[name] for name in PARAMETERS if name != "logit_shunt"]
    np.testing.assert_array_equal(seen.sd[:, others], done.sd[:, others])


@pytest.mark.parametrize("reason", ["procedure", "prompted"])
def test_a_step_made_for_another_reason_is_no_news(reason):
    step = Entry(time=START, settings=Settings(fio2=0.3), change_reason=reason)
    assert not drift(belief_of(), step).shift.any()


def test_a_step_and_its_return_are_two_pieces_of_news_that_cancel():
    there = Entry(time=START, settings=Settings(fio2=0.8))
    back = Entry(time=START + HOUR, settings=Settings(fio2=0.5))
    np.testing.assert_allclose(drift(belief_of(), there, back).shift, 0.0, atol=ROUNDING)


def test_steps_have_the_tail_of_student():
    steps = heavy_tail(np.random.default_rng(1), 200_000) * np.random.default_rng(2).standard_normal(200_000)
    # Variance of Student's t is TAIL / (TAIL - 2); with five degrees its estimate is known to about 2 %.
    assert steps.var() == pytest.approx(TAIL / (TAIL - 2.0), rel=0.08)


# The gas that a belief gives


def breathed(belief: Belief, breathing: Breathing):
    """Nothing has moved since the first gas."""
    return ventilation(belief, breathing, breathing)


def test_the_larger_rate_ventilates():
    own = charted(Measured(total_rate_per_min=28))
    for set_rate, expected in ((12.0, 28.0), (20.0, 28.0), (32.0, 32.0)):
        found = breathed(belief_of(active=True), breathing_of(own, rate_per_min=set_rate))
        np.testing.assert_allclose(found.rate_per_min, expected)  # at the middle of what the own rate may be
    slow = breathing_of(own, rate_per_min=12.0)
    stopped = ventilation(belief_of(active=True), slow, slow, stopping=slow)
    np.testing.assert_allclose(stopped.rate_per_min, 12.0)


def test_a_lowered_rate_is_felt_in_full_by_a_passive_and_in_part_by_an_active_patient():
    case = charted(Measured(total_rate_per_min=16))
    tried = breathing_of(case, rate_per_min=4.0)
    np.testing.assert_allclose(breathed(belief_of(active=False), tried).rate_per_min, 4.0)
    active = breathed(belief_of(active=True), tried).rate_per_min
    assert np.all((active > 4.0) & (active <= 16.0))


def test_series_dead_space_is_taken_off_each_breath():
    belief = belief_of(ln_series_ml=np.log(90.0), apparatus_share=0.75)
    bare = breathed(belief, breathing_of(charted()))
    # 0.02 mL: the form that keeps the series part below the breath is not quite 1 at normal volumes.
    np.testing.assert_allclose(bare.series_ml, 90.0, atol=0.02)
    np.testing.assert_allclose(bare.alveolar_l_per_min, 16 * (440 - bare.series_ml) / 1000)
    device = breathed(belief, breathing_of(charted(), apparatus_dead_space_ml=80.0))
    np.testing.assert_allclose(device.series_ml, 90.0 + 0.75 * 80.0, atol=0.5)


def test_the_smallest_breath_still_reaches_the_lung():
    tiny = breathed(belief_of(), breathing_of(charted(), tidal_volume_ml=60.0))
    assert np.all(tiny.series_ml <= LARGEST_SERIES_SHARE * 60.0)
    assert np.all(tiny.alveolar_l_per_min > 0.0)


def gas_of(belief: Belief, breathing: Breathing, reference: Breathing | None = None, **more: object):
    asked = {"hb_g_per_dl": 11.0, "barometric_mmhg": 760.0, "units": 11} | more
    given = ventilation(belief, breathing, reference or breathing, asked.pop("stopping", None))
    return arterial_gas(belief, breathing, given, **asked)


def test_a_defended_paco2_moves_less_and_is_not_moved_beyond():
    case = charted()
    reference, tried = breathing_of(case), breathing_of(case, tidal_volume_ml=560.0)
    passive = gas_of(belief_of(active=False), tried, reference).paco2_mmhg[0]
    before = gas_of(belief_of(active=False), reference).paco2_mmhg[0]
    paco2 = [
        gas_of(belief_of(active=True, logit_defence=d), tried, reference).paco2_mmhg[0]
        for d in (-9.0, 0.0, 9.0)
    ]
    assert paco2[0] == pytest.approx(passive, rel=1e-3)  # 1 in 8,000 is taken back
    assert passive < paco2[1] < before
    assert paco2[2] == pytest.approx(before, rel=1e-3)


def test_charted_paralysis_is_effort_that_stops():
    """The same patient, once with effort stopped on the screen and once paralysed in the chart."""
    case = charted(Measured(total_rate_per_min=28))
    belief, now = belief_of(active=True, logit_defence=1.0), breathing_of(case)
    later = Entry(time=case.entries[-1].time + HOUR, events=("paralysis",))
    paralysed = breathing_of(replace(case, entries=(*case.entries, later)))
    np.testing.assert_allclose(
        gas_of(belief, paralysed, now).paco2_mmhg, gas_of(belief, now, now, stopping=now).paco2_mmhg
    )


def test_nobody_takes_back_a_loss_of_volume_by_breathing_at_sixty():
    case = charted(Measured(total_rate_per_min=34))
    belief, now = belief_of(active=True, logit_defence=9.0), breathing_of(case)
    small = ventilation(belief, replace(now, tidal_volume_ml=260.0), now)
    assert np.all(small.rate_per_min <= FASTEST_PER_MIN * (1.0 + 1e-9))
    assert np.all(small.alveolar_l_per_min < ventilation(belief, now, now).alveolar_l_per_min)
    mild = ventilation(belief, replace(now, tidal_volume_ml=430.0), now)
    assert np.all((mild.rate_per_min > 34.0) & (mild.rate_per_min < FASTEST_PER_MIN))  # said, not hidden


@pytest.mark.parametrize("rate", [10.0, 22.0])
def test_trapped_gas_undoes_part_of_a_change_of_rate(rate):
    """Scenario 3: a rate changes PaCO2 less than the plain equation says, by an unknown share."""
    belief, now = belief_of(active=False), breathing_of(charted())
    plain = ventilation(belief, replace(now, set_rate_per_min=rate), now).alveolar_l_per_min
    slow = replace(now, obstructive=True)
    trapped = ventilation(belief, replace(slow, set_rate_per_min=rate), slow).alveolar_l_per_min
    unmoved = ventilation(belief, slow, slow).alveolar_l_per_min
    share = np.log(trapped / unmoved) / np.log(plain / unmoved)
    assert np.all((share >= 1.0 - TRAPPING_MOST) & (share <= 1.0))


def test_effort_that_stops_is_missed_in_full():
    """The patient breathed at 28; with the set 16 alone PaCO2 rises as ventilation falls."""
    case = charted(Measured(total_rate_per_min=28))
    belief, now = belief_of(active=True), breathing_of(case)
    before, stopped = gas_of(belief, now).paco2_mmhg[0], gas_of(belief, now, stopping=now).paco2_mmhg[0]
    # One part of shunted blood keeps the ratio a little under that of the ventilations.
    assert stopped / before == pytest.approx(28 / 16, rel=0.03)


def test_on_the_way_from_one_gas_to_the_other():
    case = charted(events=("paralysis",))
    belief, slow, fast = belief_of(), breathing_of(case), breathing_of(case, rate_per_min=22.0, fio2=0.7)
    before, after = gas_of(belief, slow), gas_of(belief, fast)
    flow = breathed(belief, fast).alveolar_l_per_min

    def at(minutes: float, obstructive: bool = False):
        return gas_on_the_way(
            belief,
            before,
            after,
            minutes,
            alveolar_l_per_min=flow,
            weight_kg=72.0,
            obstructive=obstructive,
        )

    for name in ("paco2_mmhg", "pao2_mmhg"):
        np.testing.assert_allclose(getattr(at(0.0), name), getattr(before, name))
        np.testing.assert_allclose(getattr(at(600.0), name), getattr(settled_gas(after), name), rtol=1e-3)
    # The same stores as physics: one course, by the final ventilation past all dead space.
    effective = flow / (1.0 + np.exp(belief.of("logit_dead_space")))
    expected = paco2_on_the_way_mmhg(20.0, before.paco2_mmhg, after.paco2_mmhg, effective, 72.0)
    np.testing.assert_allclose(at(20.0).paco2_mmhg, expected)
    assert np.all(np.diff([at(m).paco2_mmhg[0] for m in (0, 5, 20, 60, 180)]) < 0)
    assert np.all(at(5.0, obstructive=True).pao2_mmhg < at(5.0).pao2_mmhg)  # oxygen washes in more slowly
    # pH belongs to PaCO2 all the way: it rises while PaCO2 falls.
    assert np.all(np.diff([at(m).ph[0] for m in (0, 5, 20, 60, 180)]) > 0)


def test_oxygen_pressure_and_haemoglobin_move_the_gas_the_right_way():
    belief, breathing = belief_of(), breathing_of(charted())
    base = gas_of(belief, breathing)
    assert gas_of(belief, replace(breathing, fio2=0.6)).pao2_mmhg[0] > base.pao2_mmhg[0]
    assert gas_of(belief, breathing, barometric_mmhg=500.0).pao2_mmhg[0] < base.pao2_mmhg[0]
    assert gas_of(belief, breathing, hb_g_per_dl=7.0).svo2[0] < base.svo2[0]


def test_what_a_clinician_reads_off_a_belief():
    found = belief_of(
        active=True, logit_shunt=0.0, ln_vco2=np.log(200.0), rq=0.8, logit_defence=0.0
    ).readable()
    assert found["shunt"][0] == pytest.approx(0.5)
    assert found["vo2_ml_per_min"][0] == pytest.approx(250.0)
    assert found["defence"][0] == pytest.approx(0.5)
    assert belief_of(active=False).readable()["defence"][0] == 0.0

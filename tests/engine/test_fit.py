"""The fit where the truth is known: made lungs, seeds, and what each measurement is worth.

Lungs are made by `engine.physics.exchange` (the same equations the fit solves, so these tests speak of the
inference, not of the equations: those have tests of their own).
"""

from dataclasses import replace
from datetime import UTC, datetime, timedelta
from functools import cache

import numpy as np
import pytest

from engine.fit import Fit, NothingToSay, fit, fits_along
from engine.fit.observation import PACO2_CV, PAO2_CV, PH_SD, TAIL, carrying_hb_g_per_dl, gas_at_37
from engine.fit.sequence import DRAWS, NEARBY, settings_at
from engine.forecast import forecast
from engine.lung import Belief, arterial_gas, breathing_at, prior_of, ventilation
from engine.lung.prior import INDEX, PARAMETERS
from engine.physics.acid_base import standard_base_excess_mmol_per_l
from engine.physics.carbon_dioxide import pco2_at_temperature_mmhg
from engine.physics.oxygen import po2_at_temperature_mmhg
from engine.record import BloodGas, Case, Entry, Measured, Patient, Settings, Site

FEW = 300  # draws, where a test asks for a direction and not for a digit
START = datetime(2031, 3, 4, 7, 0, tzinfo=UTC)
MINUTE, HOUR = timedelta(minutes=1), timedelta(hours=1)
MAN = Patient(sex="male", height_cm=175, weight_kg=72)
AT_SEA = Site(barometric_mmhg=760)
LUNG_NUMBERS = (
    "logit_shunt",
    "ln_vq_log_sd",
    "logit_dead_space",
    "ln_series_ml",
    "ln_vco2",
    "rq",
    "ln_cardiac_output",
    "standard_base_excess",
)
# Five gases that tell shunt from spread, and five that cannot.
SEVERAL_FIO2 = tuple(
    Settings(fio2=fio2, rate_per_min=rate) for fio2, rate in ((0.5, 22), (0.8, 18), (0.4, 16), (1.0, 20))
)
ONE_FIO2 = tuple(Settings(rate_per_min=step.rate_per_min) for step in SEVERAL_FIO2)
LOW_FIO2 = Settings(mode="volume", rate_per_min=18, tidal_volume_ml=440, fio2=0.35, peep_cmh2o=8)


def spread(fitted: Fit, name: str) -> float:
    return float(fitted.belief.of(name).std())


def medians(fitted: Fit) -> np.ndarray:
    return np.median(fitted.belief.values, axis=0)


@pytest.fixture(scope="module")
def stay(known_stay):
    return known_stay(first=LOW_FIO2)


@pytest.fixture(scope="module")
def told_apart(stay) -> Fit:
    return fit(stay.case(*SEVERAL_FIO2, rng=np.random.default_rng(11)), draws=600, read_as="done")


@pytest.fixture(scope="module")
def at_one_fio2(stay) -> Fit:
    return fit(stay.case(*ONE_FIO2, rng=np.random.default_rng(11)), draws=FEW, read_as="done")


# Seeds


def test_the_same_seed_gives_the_same_draws(stay):
    case = stay.case(Settings(fio2=0.6))
    first, again, other = (fit(case, seed=seed, draws=FEW) for seed in (7, 7, 8))
    np.testing.assert_array_equal(first.belief.values, again.belief.values)
    assert first.surprise == again.surprise
    assert not np.array_equal(first.belief.values, other.belief.values)


def between_seeds(case: Case, seeds: range) -> float:
    """How far the means of the lung's numbers differ between seeds: root mean square, in posterior SD."""
    fits = [fit(case, seed=seed, read_as="done") for seed in seeds]
    means = np.array([[f.belief.of(name).mean() for name in LUNG_NUMBERS] for f in fits])
    widths = np.array([[spread(f, name) for name in LUNG_NUMBERS] for f in fits])
    return float(np.sqrt(np.mean(means.var(axis=0, ddof=1) / widths.mean(axis=0) ** 2)))


# Two runs of a sampler may differ by its own error. Independent draws would give 1 / sqrt(1000) = 0.03;
# allowed is what the agreement with a general sampler is asked to be, 0.1 posterior SD, and half as much
# again as it is judged by four seeds only.
SEEDS_AGREE = 0.15


def test_seeds_agree_after_one_gas(stay):
    assert between_seeds(stay.case(), range(4)) < SEEDS_AGREE


@pytest.mark.slow
@pytest.mark.xfail(
    strict=True,
    reason="after five gases means differ by 0.24 posterior SD from seed to seed, with three times "
    "the moves by 0.18",
)
def test_seeds_agree_after_five_gases(stay):
    case = stay.case(*SEVERAL_FIO2, rng=np.random.default_rng(11))
    assert between_seeds(case, range(4)) < SEEDS_AGREE


# A lung that is known


@pytest.mark.parametrize("seed", [11, 12])
def test_the_truth_lies_inside_and_the_prior_is_narrowed(stay, seed):
    lung, case = stay.lung, stay.case(*SEVERAL_FIO2, rng=np.random.default_rng(seed))
    fitted = fit(case, draws=600, read_as="done")
    found = fitted.belief.readable()
    for name, truth in (
        ("shunt", lung.shunt),
        ("vq_log_sd", lung.vq_log_sd),
        ("standard_base_excess_mmol_per_l", lung.standard_base_excess),
        ("vco2_ml_per_min", lung.vco2_ml_per_min),
        ("alveolar_dead_space", lung.alveolar_dead_space),
    ):
        low, high = np.quantile(found[name], [0.01, 0.99])
        assert low < truth < high, name
    prior = prior_of(MAN, fitted.reference, 0.0)
    # Five gases at five FiO2 are worth more than the prior: of shunt half of its width is left at most,
    # of spread three quarters.
    for name, left in (("logit_shunt", 0.5), ("ln_vq_log_sd", 0.75)):
        assert spread(fitted, name) < left * prior.width[INDEX[name]], name


def test_the_response_of_paco2_is_known_far_better_than_its_parts(stay, told_apart):
    """VCO2 and dead space cannot be told apart by a gas; how PaCO2 answers a change of rate can."""
    lung = stay.lung
    for change in ({"rate_per_min": 12.0}, {"rate_per_min": 26.0}, {"tidal_volume_ml": 380.0}):
        found = forecast(told_apart, change)
        truth = lung.exchange(found.settings)
        for quantity in ("paco2_mmhg", "pao2_mmhg", "ph"):
            low, high = found.settled[quantity].interval(0.98)
            assert low < float(getattr(truth, quantity)) < high, (change, quantity)
    low, high = forecast(told_apart, {"rate_per_min": 26.0}).settled["paco2_mmhg"].interval(0.9)
    ventilated = told_apart.belief.of("ln_vco2")
    assert np.log(high / low) < 0.5 * np.ptp(np.quantile(ventilated, [0.05, 0.95]))


def of_four_seeds(case: Case, name: str) -> np.ndarray:
    """Draws of one number from four runs: after five gases one run alone knows a width to 20 % only."""
    return np.concatenate([f.belief.of(name) for f in runs(case)])


@cache
def runs(case: Case) -> tuple[Fit, ...]:
    return tuple(fit(case, seed=seed, draws=400, read_as="done") for seed in range(4))


def test_at_one_fio2_shunt_and_spread_are_not_told_apart(stay):
    several, one = (stay.case(*steps, rng=np.random.default_rng(11)) for steps in (SEVERAL_FIO2, ONE_FIO2))
    ties = [
        np.corrcoef(*(of_four_seeds(case, name) for name in ("logit_shunt", "ln_vq_log_sd")))[0, 1]
        for case in (one, several)
    ]
    # One PaO2 ties the two together: more of one is as good as less of the other. Some eighty ancestors are
    # left in four runs, so that a correlation is known to 0.11: -0.25 is more than two of that from nothing.
    assert ties[0] < -0.25 < ties[1], ties
    wide, narrow = (of_four_seeds(case, "ln_vq_log_sd").std() for case in (one, several))
    assert wide > 1.25 * narrow  # a width is known to 8 % then: three of that


def test_what_is_not_told_apart_is_said(told_apart, at_one_fio2):
    said = "Shunt and V/Q spread are not yet told apart"
    assert any(said in caution for caution in forecast(at_one_fio2, {}).cautions)
    assert not any(said in caution for caution in forecast(told_apart, {}).cautions)


def test_a_first_fit_is_what_plain_weighting_of_prior_draws_gives(stay):
    """Importance sampling, the bluntest sampler there is: prior draws, weighted by their likelihood."""
    case = stay.case()
    many, rng = 40_000, np.random.default_rng(5)
    entry = case.entries[1]
    assert entry.gas is not None
    breathing = breathing_at(case, settings_at(case, 1))
    excess = float(standard_base_excess_mmol_per_l(entry.gas.ph, entry.gas.paco2_mmhg))
    prior = prior_of(case.patient, breathing, excess)
    values = prior.centre + prior.width * rng.standard_normal((many, len(PARAMETERS)))
    belief = Belief(values, np.zeros(many, dtype=bool), rng.random(many))
    given = ventilation(belief, breathing, breathing)
    found = arterial_gas(belief, breathing, given, hb_g_per_dl=11.0, barometric_mmhg=760.0, units=11)

    def student(z: np.ndarray) -> np.ndarray:
        return -0.5 * (TAIL + 1.0) * np.log1p(z**2 / TAIL)

    log_weight = (
        student(np.log(entry.gas.paco2_mmhg / found.paco2_mmhg) / PACO2_CV)
        + student(np.log(entry.gas.pao2_mmhg / found.pao2_mmhg) / PAO2_CV)
        + student((entry.gas.ph - found.ph) / PH_SD)
    )
    log_weight = np.where(np.isfinite(log_weight) & ~found.held, log_weight, -np.inf)
    weight = np.exp(log_weight - log_weight.max())
    weight /= weight.sum()
    counts = 1.0 / np.sum(weight**2)
    fitted = fit(case, draws=DRAWS, read_as="done")
    error = 4.0 * np.sqrt(1.0 / counts + SEEDS_AGREE**2 / 4.0)  # of either sampler, together
    assert error < 0.5  # or the comparison would say nothing
    for name in LUNG_NUMBERS:
        mean = weight @ belief.of(name)
        sd = np.sqrt(weight @ (belief.of(name) - mean) ** 2)
        assert fitted.belief.of(name).mean() == pytest.approx(mean, abs=error * sd), name
        assert spread(fitted, name) == pytest.approx(sd, rel=error), name


# Nothing to say


def a_gas(**given: object) -> BloodGas:
    return BloodGas(**{"ph": 7.38, "paco2_mmhg": 42.0, "pao2_mmhg": 85.0, "hb_g_per_dl": 11.0} | given)


def one_gas(gas: BloodGas | None, *, conditions: tuple[str, ...] = (), **of_entry: object) -> Case:
    """A case of one entry at sea level."""
    entry = Entry(time=START, settings=LOW_FIO2, gas=gas, **of_entry)
    return Case(label="Bed 7", patient=replace(MAN, conditions=conditions), site=AT_SEA, entries=(entry,))


ON_SUPPORT = ("extracorporeal",)


@pytest.mark.parametrize(
    ("case", "says"),
    [
        (one_gas(None), "there is no blood gas in this case yet"),
        (replace(one_gas(None), entries=()), "there is no blood gas in this case yet"),
        (one_gas(a_gas(specimen="venous")), "venous"),
        (one_gas(a_gas(specimen="capillary")), "capillary"),
        (one_gas(a_gas(excluded="clotted")), "excluded"),
        (one_gas(a_gas(), conditions=ON_SUPPORT), "extracorporeal support"),
        (one_gas(a_gas(), events=("extracorporeal_start",)), "extracorporeal support"),
    ],
)
def test_nothing_to_say_and_why(case, says):
    with pytest.raises(NothingToSay) as why:
        fit(case, draws=FEW)
    assert says in str(why.value)


def test_a_gas_that_cannot_be_used_changes_nothing():
    usable = one_gas(a_gas())
    odd = a_gas(paco2_mmhg=70.0, pao2_mmhg=38.0, ph=7.15)
    alone = fit(usable, draws=FEW)
    for gas in (replace(odd, specimen="venous"), replace(odd, excluded="air in the syringe")):
        later = replace(usable, entries=(*usable.entries, Entry(time=START + HOUR, gas=gas)))
        fitted = fit(later, draws=FEW)
        np.testing.assert_array_equal(fitted.belief.values, alone.belief.values)
        assert fitted.gas_time == START


def test_an_unknown_way_of_reading_is_refused():
    with pytest.raises(ValueError, match="read_as = 'heard': expected one of seen, done"):
        fit(one_gas(a_gas()), draws=FEW, read_as="heard")


def test_fits_along_the_stay_are_those_of_the_stay_so_far(stay):
    case = stay.case(Settings(fio2=0.6), Settings(fio2=0.5))
    *_, second, third = fits_along(case, draws=FEW)
    so_far = fit(case.before(second.gas_number + 1), draws=FEW)
    np.testing.assert_array_equal(second.belief.values, so_far.belief.values)
    np.testing.assert_array_equal(third.belief.values, fit(case, draws=FEW).belief.values)
    assert [len(f.surprise) for f in (second, third)] == [2, 3]
    assert third.gas_time == case.entries[-1].time


# What each measurement is worth


@pytest.mark.parametrize(
    ("ph", "paco2_mmhg", "total_rate"),
    [(7.10, 18.0, 36), (7.38, 42.0, 18), (7.35, 65.0, 18), (7.55, 40.0, 18)],
)
def test_base_excess_is_that_of_the_gas(ph, paco2_mmhg, total_rate):
    breathing = Measured(total_rate_per_min=total_rate)
    fitted = fit(one_gas(a_gas(ph=ph, paco2_mmhg=paco2_mmhg), measured=breathing), draws=FEW)
    printed = float(standard_base_excess_mmol_per_l(ph, paco2_mmhg))
    found = np.median(fitted.belief.of("standard_base_excess"))
    # `PH_SD` is worth about 0.9 mmol/L of base excess, and the prior is centred on this gas.
    assert found == pytest.approx(printed, abs=0.9)


def test_base_excess_follows_the_next_gas_after_bicarbonate():
    first = one_gas(a_gas(ph=7.20, paco2_mmhg=40.0))
    given = Entry(time=START + HOUR, events=("bicarbonate",))
    after = Entry(time=START + 2 * HOUR, gas=a_gas(ph=7.33, paco2_mmhg=40.0))
    fitted = fit(replace(first, entries=(*first.entries, given, after)), draws=FEW)
    excess = float(standard_base_excess_mmol_per_l(7.33, 40.0))
    # Bicarbonate widens what is believed of base excess to several mmol/L, so the gas rules.
    assert np.median(fitted.belief.of("standard_base_excess")) == pytest.approx(excess, abs=1.0)


def test_a_temperature_corrected_gas_is_the_same_gas():
    warm_c, gas = 39.5, a_gas()
    ph = gas.ph - 0.0147 * (warm_c - 37.0)  # Rosenthal 1948 (memory)
    paco2 = gas.paco2_mmhg * float(pco2_at_temperature_mmhg(1.0, warm_c))
    pao2 = float(po2_at_temperature_mmhg(gas.pao2_mmhg, warm_c))
    corrected = replace(
        gas,
        ph=ph,
        paco2_mmhg=paco2,
        pao2_mmhg=pao2,
        temperature_c=warm_c,
        temperature_corrected=True,
    )
    # Severinghaus 1979 eq. 3 is inverted to far below any digit that is printed.
    np.testing.assert_allclose(gas_at_37(corrected), (gas.ph, gas.paco2_mmhg, gas.pao2_mmhg), rtol=1e-6)
    assert paco2 > 1.1 * gas.paco2_mmhg and pao2 > 1.1 * gas.pao2_mmhg  # so that the test can fail
    plain, same = fit(one_gas(gas), draws=FEW), fit(one_gas(corrected), draws=FEW)
    # A last digit may turn a draw here and there; medians may move by a small share of a width.
    away = (medians(same) - medians(plain)) / plain.belief.values.std(axis=0)
    np.testing.assert_allclose(away, 0.0, atol=0.1)
    uncorrected = fit(one_gas(replace(corrected, temperature_corrected=False)), draws=FEW)
    assert np.abs(medians(uncorrected) - medians(plain)).max() > 0.1


def test_dyshaemoglobin_is_capacity_lost():
    poisoned = a_gas(hb_g_per_dl=13.0, cohb=0.25, methb=0.05)
    assert carrying_hb_g_per_dl(one_gas(poisoned), 0) == pytest.approx(13.0 * 0.7)
    fitted, plain = (fit(one_gas(g), draws=FEW) for g in (poisoned, a_gas(hb_g_per_dl=13.0 * 0.7)))
    assert fitted.hb_g_per_dl == pytest.approx(9.1)
    np.testing.assert_allclose(medians(fitted), medians(plain), rtol=1e-6)  # the same lung but for rounding
    assert forecast(fitted, {}).now["pao2_mmhg"] == poisoned.pao2_mmhg


@pytest.mark.parametrize(
    ("measured", "number"),
    [
        (Measured(cardiac_output_l_per_min=6.0), "ln_cardiac_output"),
        (Measured(svo2=0.68), "ln_cardiac_output"),
        (Measured(vco2_ml_per_min=210.0), "ln_vco2"),
        (Measured(vo2_ml_per_min=250.0), "ln_vco2"),
    ],
)
def test_a_measurement_narrows_what_it_measures(measured, number):
    gas = a_gas()
    without, beside = fit(one_gas(gas), draws=FEW), fit(one_gas(gas, measured=measured), draws=FEW)
    assert spread(beside, number) < 0.8 * spread(
        without, number
    )  # a fifth at least: far beyond sampling error
    # An hour later it says no more about the gas.
    old = Entry(time=START, settings=LOW_FIO2, measured=measured)
    late = Entry(time=START + NEARBY + MINUTE, gas=gas)
    again = replace(one_gas(gas), entries=(old, late))
    np.testing.assert_array_equal(fit(again, draws=FEW).belief.values, without.belief.values)


def test_a_measured_output_is_believed():
    low, high = (
        fit(one_gas(a_gas(), measured=Measured(cardiac_output_l_per_min=q)), draws=FEW).belief.readable()
        for q in (3.5, 9.0)
    )
    for found, measured in ((low, 3.5), (high, 9.0)):
        inside = np.quantile(found["cardiac_output_l_per_min"], [0.01, 0.99])  # usual is 5.5
        assert inside[0] < measured < inside[1]
    # More flow means a smaller a-v difference, so that the same PaO2 needs more shunt.
    assert np.median(high["shunt"]) > np.median(low["shunt"])


# Legal files that must not end in a fault


def test_support_without_a_backup_rate_or_a_total_rate():
    supported = Settings(mode="support", rate_per_min=0, tidal_volume_ml=440, fio2=0.4, peep_cmh2o=8)
    entry = Entry(time=START, settings=supported, gas=a_gas())
    fitted = fit(Case(label="Bed 7", patient=MAN, site=AT_SEA, entries=(entry,)), draws=FEW)
    low, high = forecast(fitted, {}).next_gas["paco2_mmhg"].interval(0.9)
    assert low < 42.0 < high


def test_settings_charted_bit_by_bit():
    entries = (
        Entry(time=START, settings=Settings(mode="volume", rate_per_min=16, fio2=0.4)),
        Entry(time=START + HOUR, settings=Settings(rate_per_min=20, tidal_volume_ml=440)),
        Entry(time=START + HOUR + 10 * MINUTE, gas=a_gas()),
    )
    fitted = fit(Case(label="Bed 7", patient=MAN, site=AT_SEA, entries=entries), draws=FEW)
    assert np.isfinite(fitted.belief.values).all()


def test_a_gas_that_no_lung_explains_is_said_in_words():
    with pytest.raises(NothingToSay):
        fit(one_gas(a_gas(hb_g_per_dl=1.0), events=()), draws=FEW)

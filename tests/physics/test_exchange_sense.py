"""What must hold of any lung: conservation, direction, shapes, flags, and an answer at every corner."""

from itertools import product

import numpy as np
import pytest
from scipy.optimize import brentq

from engine.physics.acid_base import (
    ph_at_standard_base_excess,
    ph_at_whole_blood_base_excess,
    whole_blood_base_excess_mmol_per_l,
)
from engine.physics.carbon_dioxide import CO2_CONSTANT, co2_content_ml_per_dl
from engine.physics.exchange import LUNGS_AT_ONCE, MOST_EXTRACTED, UNITS, Exchange, steady_state
from engine.physics.oxygen import o2_content_ml_per_dl, po2_in_blood_mmhg, so2_in_blood

SOLVED = 1e-6  # relative: what is left when a lung counts as settled
SAME_PH = 1e-6
FEW_PAO2, FEW_PACO2 = 0.005, 0.003  # a tenth of the scatter of consecutive samples, thorson1983
LEFT_DISSOLVED = 0.005  # of arterial content: what a guess of venous PO2 can err
WITHIN_DOUGLAS_PH = (
    6.9,
    7.7,
)  # arterial, so that venous blood too lies where douglas1988 is taken as it stands
NUMBERS = ("pao2_mmhg", "paco2_mmhg", "ph", "sao2", "svo2", "mixed_alveolar_pco2_mmhg")

SICK = {
    "shunt": 0.2,
    "vq_log_sd": 0.9,
    "alveolar_dead_space": 0.25,
    "alveolar_ventilation_l_per_min": 6.0,
    "vco2_ml_per_min": 210.0,
    "vo2_ml_per_min": 255.0,
    "cardiac_output_l_per_min": 6.0,
    "hb_g_per_dl": 10.0,
    "standard_base_excess_mmol_per_l": -2.0,
    "fio2": 0.5,
    "barometric_mmhg": 750.0,
}


def many_lungs(number: int = 400) -> dict[str, np.ndarray]:
    """Lungs as different as beside a bed; one in seven cannot meet its oxygen consumption."""
    draw = np.random.default_rng(31).uniform
    return {
        "shunt": draw(0.0, 0.5, number),
        "vq_log_sd": draw(0.0, 1.8, number),
        "alveolar_dead_space": draw(0.0, 0.6, number),
        "alveolar_ventilation_l_per_min": draw(3.0, 12.0, number),
        "vco2_ml_per_min": draw(130.0, 300.0, number),
        "vo2_ml_per_min": draw(160.0, 360.0, number),
        "cardiac_output_l_per_min": draw(3.0, 10.0, number),
        "hb_g_per_dl": draw(7.0, 16.0, number),
        "standard_base_excess_mmol_per_l": draw(-12.0, 12.0, number),
        "fio2": np.where(draw(size=number) < 0.2, 1.0, draw(0.21, 1.0, number)),
        "barometric_mmhg": draw(550.0, 770.0, number),
    }


def uptake_ml_per_min(lungs: dict[str, np.ndarray], gas: Exchange, i: int) -> float:
    """Oxygen that lung ``i`` takes up, by Fick from its output alone: the mixed venous point is sought so
    that its CO2 content and base excess are those of arterial blood and the CO2 given off.
    """
    hb, output_dl = lungs["hb_g_per_dl"][i], 10.0 * lungs["cardiac_output_l_per_min"][i]
    pao2, paco2, ph, sao2, svo2 = (getattr(gas, name)[i] for name in NUMBERS[:5])
    excess = whole_blood_base_excess_mmol_per_l(ph, paco2, hb, sao2)
    carried = co2_content_ml_per_dl(paco2, ph, hb, sao2) + lungs["vco2_ml_per_min"][i] / output_dl

    def venous_ph(pco2):
        return ph_at_whole_blood_base_excess(pco2, excess, hb, svo2)

    pvco2 = brentq(
        lambda pco2: co2_content_ml_per_dl(pco2, venous_ph(pco2), hb, svo2) - carried,
        paco2,
        5.0 * paco2 + 50.0,
    )
    pvo2 = po2_in_blood_mmhg(svo2, venous_ph(pvco2), pvco2)
    arterial, venous = o2_content_ml_per_dl(pao2, sao2, hb), o2_content_ml_per_dl(pvo2, svo2, hb)
    return float(arterial - venous) * output_dl


def test_oxygen_and_carbon_dioxide_balance():
    """VCO2 leaves by the ventilated units; VO2 is what arterial blood has more than venous blood. A held lung
    takes up less than asked, every other one all of it.
    """
    lungs = many_lungs()
    gas = steady_state(**lungs)
    assert gas.settled.all() and 20 < gas.held.sum() < 200
    low, high = WITHIN_DOUGLAS_PH
    sure = (gas.ph > low) & (gas.ph < high)
    assert sure.mean() > 0.8
    given_off = lungs["alveolar_ventilation_l_per_min"] * gas.mixed_alveolar_pco2_mmhg / CO2_CONSTANT
    np.testing.assert_allclose(given_off, lungs["vco2_ml_per_min"], rtol=SOLVED)
    share = np.array([uptake_ml_per_min(lungs, gas, i) for i in range(len(gas.ph))]) / lungs["vo2_ml_per_min"]
    np.testing.assert_allclose(share[sure & ~gas.held], 1.0, rtol=SOLVED)
    assert share[sure & gas.held].max() < 1.0 - SOLVED


def test_held_lungs_keep_a_tenth_of_their_oxygen():
    """Venous blood then holds what tissues cannot take from end-capillary blood; without shunt that is
    arterial.
    """
    gas = steady_state(
        **SICK | {"shunt": 0.0, "vq_log_sd": 0.0, "cardiac_output_l_per_min": 1.5, "fio2": 1.0}
    )
    assert gas.held
    arterial = o2_content_ml_per_dl(gas.pao2_mmhg, gas.sao2, SICK["hb_g_per_dl"])
    venous_po2 = 15.0  # mmHg, as good as any: 0.05 mL/dL dissolved
    venous = o2_content_ml_per_dl(venous_po2, gas.svo2, SICK["hb_g_per_dl"])
    assert venous / arterial == pytest.approx(1.0 - MOST_EXTRACTED, abs=LEFT_DISSOLVED)


def test_arterial_blood_is_one_point():
    """Its pH is that of its standard base excess, its saturation that of its tensions."""
    lungs = many_lungs()
    gas = steady_state(**lungs)
    ph = ph_at_standard_base_excess(gas.paco2_mmhg, lungs["standard_base_excess_mmol_per_l"])
    np.testing.assert_allclose(gas.ph, ph, rtol=0, atol=SAME_PH)
    np.testing.assert_allclose(gas.sao2, so2_in_blood(gas.pao2_mmhg, gas.ph, gas.paco2_mmhg), rtol=SOLVED)


@pytest.mark.parametrize(
    ("name", "values", "saturation", "tension", "carbon_dioxide"),
    [
        ("shunt", np.linspace(0.0, 0.6, 31), -1, -1, 1),
        ("vq_log_sd", np.linspace(0.0, 1.8, 37), -1, -1, 1),
        ("fio2", np.linspace(0.21, 1.0, 41), 1, 1, None),
        ("alveolar_ventilation_l_per_min", np.linspace(3.0, 15.0, 41), 1, None, -1),
        ("alveolar_dead_space", np.linspace(0.0, 0.7, 36), -1, None, 1),
        ("vco2_ml_per_min", np.linspace(120.0, 350.0, 24), -1, None, 1),
        ("vo2_ml_per_min", np.linspace(150.0, 400.0, 26), -1, -1, None),
        ("cardiac_output_l_per_min", np.linspace(4.0, 12.0, 33), 1, 1, None),
        ("hb_g_per_dl", np.linspace(7.0, 18.0, 23), 1, 1, None),
        ("barometric_mmhg", np.linspace(500.0, 770.0, 28), 1, 1, None),
    ],
)
def test_each_input_pushes_one_way(name, values, saturation, tension, carbon_dioxide):
    """Common sense, no source; where two effects pull apart (None) nothing is asked. More oxygen in venous
    blood lifts PaO2 behind a shunt: more output, more haemoglobin. Alkaline blood behind a shunt has less
    PaO2 for its oxygen.
    """
    gas = steady_state(**SICK | {name: values})
    assert gas.settled.all() and not gas.held.any()
    for numbers, sign in ((gas.sao2, saturation), (gas.pao2_mmhg, tension), (gas.paco2_mmhg, carbon_dioxide)):
        if sign is not None:
            assert np.all(sign * np.diff(numbers) > 0.0)


def test_ventilation_lifts_pao2_where_no_shunt_stands_behind():
    ventilation = np.linspace(3.0, 15.0, 41)
    gas = steady_state(**SICK | {"shunt": 0.0, "alveolar_ventilation_l_per_min": ventilation})
    assert np.all(np.diff(gas.pao2_mmhg) > 0.0)


@pytest.mark.parametrize("shape", [(), (3,), (2, 3), (2, 1, 4), (0,)])
def test_keeps_shape(shape):
    gas = steady_state(**SICK | {"shunt": np.full(shape, 0.2)})
    assert all(getattr(gas, name).shape == shape for name in (*NUMBERS, "held", "settled"))
    assert gas.held.dtype == gas.settled.dtype == bool


def test_inputs_broadcast():
    shunt, fio2 = np.array([[0.1], [0.3]]), np.array([0.3, 0.5, 1.0])
    together = steady_state(**SICK | {"shunt": shunt, "fio2": fio2}).pao2_mmhg
    for i, j in product(range(2), range(3)):
        alone = steady_state(**SICK | {"shunt": shunt[i, 0], "fio2": fio2[j]}).pao2_mmhg
        assert together[i, j] == pytest.approx(float(alone), rel=SOLVED)


def test_a_lung_does_not_depend_on_its_neighbours():
    """Blocks, and lungs that settle late and go on by themselves, are matters of speed only."""
    lungs = many_lungs(LUNGS_AT_ONCE + 30)
    together = steady_state(**lungs)
    backwards = steady_state(**{name: values[::-1] for name, values in lungs.items()})
    for name in NUMBERS:
        np.testing.assert_allclose(
            getattr(together, name), getattr(backwards, name)[::-1], rtol=SOLVED, err_msg=name
        )


@pytest.mark.parametrize("name", sorted(SICK))
def test_nan_in_nan_out(name):
    """And nothing else suffers."""
    values = np.full(3, SICK[name])
    values[1] = np.nan
    gas = steady_state(**SICK | {name: values})
    assert gas.settled.tolist() == [True, False, True]
    assert not gas.held[1]
    for number in NUMBERS:
        assert np.isnan(getattr(gas, number)).tolist() == [False, True, False]


def test_every_corner_settles():
    """Base excess of 25 either way, haemoglobin 4 to 20, high altitude, air to pure oxygen, no spread to the
    widest, dead space 0.8, shunt to 0.5, output 3.5 to 12, ventilated to an alveolar PCO2 of 15 to 90 mmHg.
    """
    corners = {
        "standard_base_excess_mmol_per_l": (-25.0, 0.0, 25.0),
        "hb_g_per_dl": (4.0, 10.0, 20.0),
        "barometric_mmhg": (493.0, 760.0),
        "fio2": (0.21, 0.5, 1.0),
        "vq_log_sd": (0.0, 1.0, 2.0),
        "alveolar_dead_space": (0.0, 0.8),
        "shunt": (0.0, 0.3, 0.5),
        "cardiac_output_l_per_min": (3.5, 6.0, 12.0),
        "palvco2": (15.0, 40.0, 90.0),
    }
    lungs = dict(zip(corners, np.array(list(product(*corners.values()))).T, strict=True))
    effective = CO2_CONSTANT * 200.0 / lungs.pop("palvco2")
    lungs["alveolar_ventilation_l_per_min"] = effective / (1.0 - lungs["alveolar_dead_space"])
    gas = steady_state(vco2_ml_per_min=200.0, vo2_ml_per_min=250.0, **lungs)
    assert gas.settled.all()
    for name in NUMBERS:
        assert np.isfinite(getattr(gas, name)).all(), name
    assert np.all((gas.sao2 > 0.0) & (gas.sao2 < 1.0) & (gas.svo2 > 0.0) & (gas.svo2 < gas.sao2))


def test_no_answer_rather_than_a_wrong_one():
    """Where CO2 would leave no room for oxygen (PaCO2 past 360 mmHg) there is no lung; it is said, and all is
    NaN.
    """
    gas = steady_state(**SICK | {"alveolar_ventilation_l_per_min": [6.0, 0.2]})
    assert gas.settled.tolist() == [True, False]
    assert all(np.isnan(getattr(gas, name)[1]) for name in NUMBERS)
    assert not gas.held[1]


def test_random_lungs_of_any_kind_are_settled_or_nan():
    draw = np.random.default_rng(32).uniform
    number = 3000
    gas = steady_state(
        shunt=draw(0.0, 0.95, number),
        vq_log_sd=draw(0.0, 2.2, number),
        alveolar_dead_space=draw(0.0, 0.9, number),
        alveolar_ventilation_l_per_min=np.exp(draw(-1.0, 3.2, number)),
        vco2_ml_per_min=draw(50.0, 600.0, number),
        vo2_ml_per_min=draw(50.0, 700.0, number),
        cardiac_output_l_per_min=draw(1.0, 18.0, number),
        hb_g_per_dl=draw(3.0, 22.0, number),
        standard_base_excess_mmol_per_l=draw(-25.0, 25.0, number),
        fio2=draw(0.1, 1.0, number),
        barometric_mmhg=draw(450.0, 780.0, number),
    )
    for name in NUMBERS:
        np.testing.assert_array_equal(np.isfinite(getattr(gas, name)), gas.settled)
    assert not gas.held[~gas.settled].any()
    assert 0.5 < gas.settled.mean() < 1.0  # most of them, and some past any help


def test_fewer_units_for_fitting_stay_close():
    """11 units, as many as the fit takes: below a tenth of the scatter of a sample in the median lung."""
    lungs = many_lungs()
    few, usual = steady_state(**lungs, units=11), steady_state(**lungs, units=UNITS)
    assert np.median(np.abs(few.pao2_mmhg / usual.pao2_mmhg - 1.0)) < FEW_PAO2
    assert np.median(np.abs(few.paco2_mmhg / usual.paco2_mmhg - 1.0)) < FEW_PACO2

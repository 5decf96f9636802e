"""The lung of many units: arterial gas of a steady state, for thousands of lungs at once.

A lung is a true shunt, perfused units whose ventilation-perfusion ratio is log-normal over blood flow, and
alveolar dead space. In every unit gas and end-capillary blood are in equilibrium and oxygen, carbon dioxide
and nitrogen balance; mixed venous contents close the loop, so that the whole lung takes up VO2 and gives off
VCO2. Arterial tensions follow from mixed contents, never from averaged tensions.

Equations, per unit with expired ventilation over flow ``r`` (BTPS over blood) and K = 8.63 mmHg dL/mL::

CO2   r PCO2 = K (CvCO2 - CcCO2)
O2    r (PIO2 - PO2 - FiO2 PCO2) = K (1 - FiO2) (CcO2 - CvO2)       nitrogen balance is in it
pH    whole-blood base excess is one value in the whole lung        (Van Slyke, langzander2002)

and per lung, with flow weights ``w`` and perfused flow (1 - s) Q::

CvO2  = sum(w CcO2)  - VO2  / (10 (1 - s) Q)
CvCO2 = sum(w CcCO2) + VCO2 / (10 (1 - s) Q)

Arterial blood keeps its STANDARD base excess (extracellular buffer line, clsi_c46), since the whole body has
had time; blood inside the lung buffers as whole blood, since a capillary transit takes under a second.

Solved by Newton's method on all units, both mixed venous contents and arterial blood together: the unknowns
of a unit meet other units only through the two venous contents, so each step eliminates the units (2 x 2
each) and solves a 2 x 2 system a lung. Blood is described by two numbers that give everything else outright:
the PO2 of the standard curve, which is saturation, and bicarbonate, from which the buffer line gives pH and
so both tensions. The level of that line follows arterial blood one step behind, which leaves about a
hundredth of its error a step.

Arrays of the solver are (rows, lungs): a row for each unit, then mixed venous blood, then arterial blood. The
last two meet no gas, so they are units of no ventilation, and of no weight, and are solved like any other.

References
----------
west1969 : J. B. West, "Ventilation-perfusion inequality and overall gas exchange in computer models of the
lung", Respir. Physiol. 7, 88-110, 1969 (the model of many units).
severinghaus1979, kelman1966 : saturation and its shift, see `engine.physics.oxygen`.
douglas1988 : CO2 content of blood, see `engine.physics.carbon_dioxide`.
langzander2002, clsi_c46 : base excess, see `engine.physics.acid_base`.
farhi1967 : L. E. Farhi, "Elimination of inert gas by the lung", Respir. Physiol. 3, 1-11, 1967 (first guess).
hill1910 : A. V. Hill, "The possible effects of the aggregation of the molecules of haemoglobin on its
    dissociation curves", J. Physiol. 40 (suppl.), iv-vii, 1910 (first guess).
"""

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from engine.physics.acid_base import (
    hco3_mmol_per_l,
    ph_at_standard_base_excess,
    standard_base_excess_mmol_per_l,
    whole_blood_base_excess_mmol_per_l,
)
from engine.physics.air import BODY_WATER_VAPOUR_MMHG
from engine.physics.carbon_dioxide import CO2_CONSTANT, co2_pk, co2_solubility_mmol_per_l_mmhg
from engine.physics.oxygen import O2_CAPACITY_ML_PER_G, O2_SOLUBILITY_ML_PER_DL_MMHG

Array = NDArray[np.float64]
Some = NDArray[np.bool_]

LN10 = float(np.log(10.0))
K = 10.0 * CO2_CONSTANT  # mmHg dL/mL: L BTPS of gas against dL STPD of content
ECF_BUFFER = float(standard_base_excess_mmol_per_l(8.4, 0.0) - standard_base_excess_mmol_per_l(7.4, 0.0))

UNITS = 15  # of the V/Q distribution: within 1.3 % of PaO2 and 0.2 mmHg of PaCO2 to SD 1.8 (5,000 lungs)
REACH = 3.5  # SD of flow and of ventilation that the units span
VENOUS, ARTERY = -2, -1  # the rows below the units
MOST_EXTRACTED = 0.9  # share of end-capillary O2 the tissues can take; beyond it VO2 falls (numerical guard)
LEAST_NITROGEN = 1e-9  # of inspired gas: keeps blood that meets no gas solvable at FiO2 1.0
DOUGLAS_PH = (6.8, 7.8)  # outside, the red-cell factor of douglas1988 is held: it is singular at 8.142
LARGEST_STEP = 1.0  # of the logarithms in one Newton step
STEPS = 60
PATIENCE = (
    10  # steps; then the level goes half way, as between two pieces of a held slope it can swing for ever
)
SETTLED = 3e-4  # last step of the logarithms: what is left is about its square
LEVEL_SETTLED = 5e-5  # mmol/L, last step of the level: what is left moves PaO2 by less than 1e-6 of itself
SET_ASIDE = 0.5  # of a block: so many settled lungs are worth the copying of the others
LUNGS_AT_ONCE = 1024  # many enough that the calls cost little, few enough for the processor's cache
START_SOLUBILITY = 3.5  # of CO2 in blood over gas (farhi1967), and
START_CO2 = 2.9  # mL/dL of CO2 content a mmol/L of bicarbonate: with these two most lungs take three steps

# Asked for and given back at once: from then on the allocator keeps what it frees, a tenth of a fit's time.
np.empty(1 << 20)


@dataclass(frozen=True, slots=True, eq=False)
class Exchange:
    """Steady state of many lungs; every array has the broadcast shape of the inputs.

    ``held`` marks lungs whose oxygen consumption could not be met and was cut to `MOST_EXTRACTED`;
    ``settled`` marks lungs whose solution converged (elsewhere all values are NaN).
    """

    pao2_mmhg: Array
    paco2_mmhg: Array
    ph: Array
    sao2: Array
    svo2: Array
    mixed_alveolar_pco2_mmhg: Array
    held: NDArray[np.bool_]
    settled: NDArray[np.bool_]


def steady_state(
    *,
    shunt: ArrayLike,
    vq_log_sd: ArrayLike,
    alveolar_dead_space: ArrayLike,
    alveolar_ventilation_l_per_min: ArrayLike,
    vco2_ml_per_min: ArrayLike,
    vo2_ml_per_min: ArrayLike,
    cardiac_output_l_per_min: ArrayLike,
    hb_g_per_dl: ArrayLike,
    standard_base_excess_mmol_per_l: ArrayLike,
    fio2: ArrayLike,
    barometric_mmhg: ArrayLike = 760.0,
    temperature_c: ArrayLike = 37.0,
    units: int = UNITS,
) -> Exchange:
    """Arterial gas once the body has settled.

    Parameters
    ----------
    shunt : array_like
        True shunt as a fraction of cardiac output, 0 to below 1.
    vq_log_sd : array_like
        SD of ln(V/Q) over blood flow of the perfused units, 0 to about 2.
    alveolar_dead_space : array_like
        Fraction of alveolar ventilation that meets no blood, 0 to below 1.
    alveolar_ventilation_l_per_min : array_like
        Expired alveolar ventilation (BTPS) before alveolar dead space is taken off, > 0.
    vco2_ml_per_min, vo2_ml_per_min : array_like
        CO2 output and O2 uptake, STPD.
    cardiac_output_l_per_min : array_like
    hb_g_per_dl : array_like
        Haemoglobin that can carry oxygen (dyshaemoglobin taken off).
    standard_base_excess_mmol_per_l : array_like
        Of arterial blood (clsi_c46).
    fio2 : array_like
        0.1 to 1.
    barometric_mmhg, temperature_c : array_like
    units : int
        Nodes of the V/Q distribution.

    Returns
    -------
    Exchange
        Arrays of the broadcast shape. NaN in, NaN out; a lung that does not converge is NaN and
        not ``settled``. None does where CO2 leaves no room for oxygen: PaCO2 beyond about 360 mmHg.
    """
    given = np.broadcast_arrays(
        *(
            np.asarray(a, dtype=float)
            for a in (
                shunt,
                vq_log_sd,
                alveolar_dead_space,
                alveolar_ventilation_l_per_min,
                vco2_ml_per_min,
                vo2_ml_per_min,
                cardiac_output_l_per_min,
                hb_g_per_dl,
                standard_base_excess_mmol_per_l,
                fio2,
                barometric_mmhg,
                temperature_c,
            )
        )
    )
    columns = np.array([a.reshape(-1) for a in given])
    with np.errstate(all="ignore"):  # a lung that runs away ends as NaN and is said to be unsettled
        blocks = [
            _solve(_Lungs(*columns[:, start : start + LUNGS_AT_ONCE]), units)
            for start in range(0, max(columns.shape[1], 1), LUNGS_AT_ONCE)
        ]
    return Exchange(*(np.concatenate(parts).reshape(given[0].shape) for parts in zip(*blocks, strict=True)))


class _Lungs(NamedTuple):
    """A block of lungs: one row each, all of shape (lungs,)."""

    shunt: Array
    vq_log_sd: Array
    dead: Array
    ventilation: Array
    vco2: Array
    vo2: Array
    output: Array
    hb: Array
    sbe: Array
    fio2: Array
    barometric: Array
    temperature: Array


class _Makeup(NamedTuple):
    """What the blood of a lung keeps while its tensions move, each (lungs,).

    Oxygen: ``capacity`` in mL/dL; ``warmth``, shift of the curve in ln PO2 at pH 7.4 and a PCO2 of 1 mmHg.
    CO2: ``dissolved`` in plasma in mL/dL/mmHg; ``bound``, ln of bound over dissolved at pH 7.4, and its slope
    ``bound_t`` on pH; ``cells`` as in douglas1988. Buffer line of whole blood, in mmol/L with t = pH - 7.4
    and bicarbonate h = exp(``ln_hco3``) PCO2 10^t: h + ``buffer`` t - ``deoxy`` (1 - S) = level.
    """

    capacity: Array
    dissolved: Array
    bound: Array
    bound_t: Array
    cells: Array
    ln_hco3: Array
    buffer: Array
    deoxy: Array
    warmth: Array


def _makeup(hb: Array, temperature: Array) -> _Makeup:
    def excess(ph: float, pco2: float, so2: float) -> Array:
        return whole_blood_base_excess_mmol_per_l(ph, pco2, hb, so2)

    nothing, pk = excess(7.4, 0.0, 1.0), co2_pk(7.4, temperature)
    return _Makeup(
        O2_CAPACITY_ML_PER_G * hb,
        2.226 * co2_solubility_mmol_per_l_mmhg(temperature),
        LN10 * (7.4 - pk),
        LN10 * (1.0 - co2_pk(8.4, temperature) + pk),
        0.0289 * hb,
        np.log(excess(7.4, 1.0, 1.0) - nothing),
        excess(8.4, 0.0, 1.0) - nothing,
        nothing - excess(7.4, 0.0, 0.0),
        0.06 * np.log(40.0) + 0.024 * LN10 * (37.0 - temperature),
    )


class _State(NamedTuple):
    """Points in blood: ``v``, ln of PO2 on the standard curve, and ``u``, ln of bicarbonate."""

    v: Array
    u: Array


class _Point(NamedTuple):
    """Blood at a state: saturation and its slope on v, bicarbonate, pH - 7.4 (t), ln PO2 (x), ln PCO2 (y)."""

    so2: Array
    steep: Array
    hco3: Array
    t: Array
    x: Array
    y: Array


class _Blood(NamedTuple):
    """Tensions, contents in mL/dL, and slopes of ln PO2 (``x``), ln PCO2 (``y``) and contents on v and u."""

    po2: Array
    x_v: Array
    x_u: Array
    pco2: Array
    y_v: Array
    y_u: Array
    o2: Array
    o2_v: Array
    o2_u: Array
    co2: Array
    co2_v: Array
    co2_u: Array


def _saturation(standard: Array) -> tuple[Array, Array]:
    """Saturation at ln PO2 on the standard curve, and its slope."""
    p = np.exp(standard)
    square = p * p + 150.0
    cubic = p * square
    so2 = cubic / (cubic + 23_400.0)
    return so2, so2 * (1.0 - so2) * (3.0 - 300.0 / square)


def _shift(t: Array, y: Array, makeup: _Makeup) -> Array:
    """What takes ln PO2 of this blood to ln PO2 on the standard curve."""
    return 0.40 * LN10 * t - 0.06 * y + makeup.warmth


def _point(state: _State, makeup: _Makeup, level: Array) -> _Point:
    """Where blood stands on the buffer line of this level."""
    so2, steep = _saturation(state.v)
    hco3 = np.exp(state.u)
    t = (level + makeup.deoxy * (1.0 - so2) - hco3) / makeup.buffer
    y = state.u - LN10 * t - makeup.ln_hco3
    return _Point(so2, steep, hco3, t, state.v - _shift(t, y, makeup), y)


def _blood(p: _Point, makeup: _Makeup) -> _Blood:
    """What blood at a point holds, and how it answers."""
    po2, pco2 = np.exp(p.x), np.exp(p.y)
    t_v, t_u = (-makeup.deoxy / makeup.buffer) * p.steep, (-1.0 / makeup.buffer) * p.hco3
    y_v, y_u = -LN10 * t_v, 1.0 - LN10 * t_u
    x_v, x_u = 1.0 + 0.46 * y_v, 0.46 * y_u - 0.40
    free_o2 = O2_SOLUBILITY_ML_PER_DL_MMHG * po2

    dissolved = makeup.dissolved * pco2
    bound = dissolved * np.exp(makeup.bound + makeup.bound_t * p.t)
    plasma = dissolved + bound
    held = np.minimum(np.maximum(p.t, DOUGLAS_PH[0] - 7.4), DOUGLAS_PH[1] - 7.4)
    of_so2, of_ph = 1.0 / (3.352 - 0.456 * p.so2), 1.0 / (0.742 - held)
    cells = makeup.cells * of_so2 * of_ph
    missing = plasma * cells
    content = plasma - missing
    on_t = makeup.bound_t * bound * (1.0 - cells) - missing * of_ph * (p.t == held) - LN10 * content
    return _Blood(
        po2,
        x_v,
        x_u,
        pco2,
        y_v,
        y_u,
        makeup.capacity * p.so2 + free_o2,
        makeup.capacity * p.steep + free_o2 * x_v,
        free_o2 * x_u,
        content,
        on_t * t_v - 0.456 * missing * of_so2 * p.steep,
        content + on_t * t_u,
    )


def _bounded(step: Array, most: float) -> Array:
    return np.minimum(np.maximum(step, -most), most)


def _sum(values: Array, weight: Array) -> Array:
    """Weighted sum over the rows of each lung."""
    total: Array = np.einsum("ul,ul->l", values, weight)
    return total


class _Problem(NamedTuple):
    """A block of lungs with its rows laid out.

    (rows, lungs): ventilation over flow ``r``, O2 ``inspired`` with it (r PIO2), and ``weight``, the share of
    perfused flow. (lungs,): ``nitrogen``, K times its inspired fraction; ``uptake`` and ``output``, what
    tissues take and give in mL per dL of perfused flow.
    """

    lungs: _Lungs
    makeup: _Makeup
    r: Array
    inspired: Array
    weight: Array
    nitrogen: Array
    uptake: Array
    output: Array

    def of(self, kept: NDArray[np.intp]) -> "_Problem":
        """The same problem for some of the lungs."""
        lungs, makeup, *arrays = self
        return _Problem(
            _Lungs(*(a[kept] for a in lungs)),
            _Makeup(*(a[kept] for a in makeup)),
            *(a[..., kept] for a in arrays),
        )


def _nodes(vq_log_sd: Array, units: int) -> tuple[Array, Array]:
    """Standard normal deviates of the units and their share of perfused flow, each (units, lungs).

    Equal steps from -3.5 to 3.5 + SD: blood flow is normal about 0 and ventilation about SD, and both tails
    count. The trapezium rule with Gaussian weights converges faster than any power of the step; at equal
    count it beat Gauss-Hermite nodes threefold here, as it keeps nodes where the knee of the curve lies.
    """
    deviate = -REACH + (2.0 * REACH + vq_log_sd) * np.linspace(0.0, 1.0, units)[:, None]
    weight = np.exp(-0.5 * deviate * deviate)
    return deviate, weight / weight.sum(axis=0)


def _laid_out(lungs: _Lungs, units: int) -> _Problem:
    deviate, weight = _nodes(lungs.vq_log_sd, units)
    perfused = lungs.output * (1.0 - lungs.shunt)
    spread = np.exp(lungs.vq_log_sd * deviate)
    r = spread * (lungs.ventilation * (1.0 - lungs.dead) / perfused / _sum(spread, weight))
    no_gas = ((0, 2), (0, 0))  # the venous and the arterial row
    r = np.pad(r, no_gas)
    return _Problem(
        lungs,
        _makeup(lungs.hb, lungs.temperature),
        r,
        r * (lungs.fio2 * (lungs.barometric - BODY_WATER_VAPOUR_MMHG)),
        np.pad(weight, no_gas),
        K * np.maximum(1.0 - lungs.fio2, LEAST_NITROGEN),
        lungs.vo2 / (10.0 * perfused),
        lungs.vco2 / (10.0 * perfused),
    )


def _start(problem: _Problem) -> tuple[_State, Array]:
    """First guess of all points and of the level: CO2 before O2, each by one step of its own.

    CO2 is first a gas of one solubility (farhi1967); then bicarbonate stands for its content, and the buffers
    say which PCO2 goes with it. O2 starts from what the gas of a unit can bring.
    """
    lungs, makeup, r, _, weight, _, _, output = problem
    share = START_SOLUBILITY / (START_SOLUBILITY + r)
    venous = K * output / _sum(r * share, weight)
    artery = venous * ((1.0 - lungs.shunt) * _sum(share, weight) + lungs.shunt)
    t = ph_at_standard_base_excess(artery, lungs.sbe) - 7.4
    here = np.exp(makeup.ln_hco3 + LN10 * t) * artery  # bicarbonate of arterial blood
    line = here + makeup.buffer * t
    bend = LN10 / makeup.buffer
    guess = here * np.exp(np.log(share * (venous / artery)) / (1.0 + bend * here))
    gas = r / (START_CO2 * K) * np.exp(bend * (guess - line) - makeup.ln_hco3)
    excess = guess * (gas + 1.0) - here - lungs.vco2 / (10.0 * lungs.output * START_CO2)
    hco3 = guess - excess / (gas * (1.0 + bend * guess) + 1.0)
    hco3[ARTERY] = (1.0 - lungs.shunt) * _sum(hco3, weight) + lungs.shunt * hco3[VENOUS]

    u, t = np.log(hco3), (line - hco3) / makeup.buffer
    y = u - LN10 * t - makeup.ln_hco3
    v = _start_of_o2(problem, np.exp(y), _shift(t, y, makeup))
    so2, _ = _saturation(v)
    level = _level(y[ARTERY], so2[ARTERY], t[ARTERY], lungs.sbe, makeup)
    kept = bend * (level - line + makeup.deoxy * (1.0 - so2)) / (1.0 + bend * hco3)  # PCO2 stays where it is
    return _State(v, u + kept), level


def _start_of_o2(problem: _Problem, pco2: Array, shift: Array) -> Array:
    """First guess of v: a Newton step of the units for O2 alone, then blood of the contents it gives."""
    lungs, makeup, r, inspired, weight, nitrogen, uptake, _ = problem
    capacity = makeup.capacity
    venous = np.maximum(0.98 * capacity - uptake, 0.2 * capacity)
    brought = inspired - lungs.fio2 * r * pco2
    starved = _hill((venous + (brought - 45.0 * r) / nitrogen) / capacity) - shift
    x = np.fmax(np.log((brought - nitrogen * (capacity - venous)) / r), starved)
    o2, o2_x = _o2(x, shift, capacity)
    gas = r * np.exp(x)
    stiff = gas + nitrogen * o2_x
    alone, per_o2 = (brought - gas - nitrogen * o2) / stiff, nitrogen / stiff
    capillary, back = _sum(o2 + o2_x * alone, weight), _sum(o2_x * per_o2, weight)
    least = 1.0 - MOST_EXTRACTED
    venous = np.maximum((capillary - uptake) / (1.0 - back), least * capillary / (1.0 - least * back))
    x = x + _bounded(alone + per_o2 * venous, LARGEST_STEP)

    mixed = (1.0 - lungs.shunt) * (capillary + back * venous) + lungs.shunt * venous
    content = np.stack([venous, mixed])
    whole, shift = shift, shift[VENOUS:]
    ends = np.fmax(
        _hill(content / capacity) - shift, np.log((content - capacity) / O2_SOLUBILITY_ML_PER_DL_MMHG)
    )
    for _ in range(2):
        o2, o2_x = _o2(ends, shift, capacity)
        ends = ends + _bounded((content - o2) / o2_x, LARGEST_STEP)
    x[VENOUS:] = ends
    return x + whole


def _o2(x: Array, shift: Array, capacity: Array) -> tuple[Array, Array]:
    """O2 content at ln PO2 and a shift of the curve, and its slope."""
    so2, steep = _saturation(x + shift)
    free = O2_SOLUBILITY_ML_PER_DL_MMHG * np.exp(x)
    return capacity * so2 + free, capacity * steep + free


def _hill(so2: Array) -> Array:
    """About ln PO2 on the standard curve (hill1910), of any guess at a saturation."""
    so2 = _within(so2, 0.05, 0.98)
    return np.asarray(np.log(26.9) + np.log(so2 / (1.0 - so2)) / 2.7)


def _within(values: Array, low: float, high: float) -> Array:
    return np.minimum(np.maximum(values, low), high)


class _Step(NamedTuple):
    """What one Newton step gives. A lung is ``held`` where VO2 was cut and ``lost`` where it ran away."""

    state: _State
    level: Array
    held: Some
    settled: Some
    lost: Some


def _step(problem: _Problem, now: _State, level: Array, pace: float = 1.0) -> _Step:
    """One Newton step of all rows and of both mixed venous contents.

    A row's step is linear in the O2 and CO2 that come with its blood. Put into the closing equations that
    leaves a 2 x 2 system a lung for the venous contents; arterial blood then takes the mixed contents.
    """
    lungs, makeup, r, inspired, weight, nitrogen, uptake, output = problem
    here = _point(now, makeup, level)
    b = _blood(here, makeup)
    gas_o2, gas_co2 = r * b.po2, r * b.pco2
    made_room = lungs.fio2 * gas_co2
    a11 = gas_o2 * b.x_v + made_room * b.y_v + nitrogen * b.o2_v
    a12 = gas_o2 * b.x_u + made_room * b.y_u + nitrogen * b.o2_u
    a21, a22 = gas_co2 * b.y_v + K * b.co2_v, gas_co2 * b.y_u + K * b.co2_u
    inverse = 1.0 / (a11 * a22 - a12 * a21)  # of a (dx, dy) = f + (nitrogen, K) x contents that come
    f1 = inspired - gas_o2 - made_room - nitrogen * b.o2
    f2 = -gas_co2 - K * b.co2

    shared = weight * inverse
    o1, o2 = shared * (b.o2_v * a22 - b.o2_u * a21), shared * (b.o2_u * a11 - b.o2_v * a12)
    c1, c2 = shared * (b.co2_v * a22 - b.co2_u * a21), shared * (b.co2_u * a11 - b.co2_v * a12)
    o = _sum(b.o2, weight) + _sum(o1, f1) + _sum(o2, f2)  # end-capillary contents, were venous ones nothing
    c = _sum(b.co2, weight) + _sum(c1, f1) + _sum(c2, f2)
    oo, oc = nitrogen * o1.sum(axis=0), K * o2.sum(axis=0)  # and what venous ones add
    co, cc = nitrogen * c1.sum(axis=0), K * c2.sum(axis=0)

    def venous_o2(left: float, content: Array) -> Array:
        """O2 content if it is ``content`` and ``left`` of what venous blood adds to end-capillary blood."""
        across = left * oc
        alone = (1.0 - left * oo) * (1.0 - cc) - across * co
        return np.asarray((content * (1.0 - cc) + across * (c + output)) / alone)

    least = 1.0 - MOST_EXTRACTED
    enough, cut = venous_o2(1.0, o - uptake), venous_o2(least, least * o)
    vo2 = np.maximum(enough, cut)
    vco2 = (c + output + co * vo2) / (1.0 - cc)
    ao2, aco2 = (
        (1.0 - lungs.shunt) * capillary + lungs.shunt * venous
        for capillary, venous in ((o + oo * vo2 + oc * vco2, vo2), (c + co * vo2 + cc * vco2, vco2))
    )
    f1[:ARTERY] += nitrogen * vo2
    f2[:ARTERY] += K * vco2
    f1[ARTERY] += nitrogen * ao2
    f2[ARTERY] += K * aco2
    dv = _bounded((f1 * a22 - f2 * a12) * inverse, LARGEST_STEP)
    du = _bounded((f2 * a11 - f1 * a21) * inverse, LARGEST_STEP)

    dva, dua = dv[ARTERY], du[ARTERY]
    dy = b.y_v[ARTERY] * dva + b.y_u[ARTERY] * dua
    so2 = _within(here.so2[ARTERY] + here.steep[ARTERY] * dva, 0.0, 1.0)
    t = here.t[ARTERY] + (dua - dy) / LN10
    rise = _level(here.y[ARTERY] + dy, so2, t, lungs.sbe, makeup) - level
    kept = pace * LN10 / makeup.buffer * rise / b.y_u  # PCO2 stays where it is as the level moves
    new = _State(now.v + dv, now.u + du + kept)
    moved = np.maximum(np.abs(dv), np.abs(du)).max(axis=0)
    settled = (moved <= SETTLED) & (np.abs(rise) <= LEVEL_SETTLED)
    return _Step(new, level + pace * rise, cut > enough, settled, np.isnan(moved))


def _level(y: Array, so2: Array, t: Array, sbe: Array, makeup: _Makeup) -> Array:
    """The level of the buffer line through arterial blood at its standard base excess, pH about 7.4 + t.

    That pH is found by one step of Newton's method.
    """
    pco2 = np.exp(y)
    misfit = standard_base_excess_mmol_per_l(7.4 + t, pco2) - sbe
    t = t - misfit / (LN10 * hco3_mmol_per_l(7.4 + t, pco2) + ECF_BUFFER)
    return np.asarray(np.exp(y + makeup.ln_hco3 + LN10 * t) + makeup.buffer * t - makeup.deoxy * (1.0 - so2))


def _solve(lungs: _Lungs, units: int) -> tuple[NDArray[Any], ...]:
    """Newton's method on one block of lungs; returns the fields of `Exchange` in order."""
    problem = _laid_out(lungs, units)
    state, level, held, settled = _newton(problem)
    so2, _, _, t, x, y = _point(state, problem.makeup, level)
    vented = _sum(problem.r * np.exp(y), problem.weight) / _sum(problem.r, problem.weight)
    known = (
        np.exp(x[ARTERY]),
        np.exp(y[ARTERY]),
        7.4 + t[ARTERY],
        so2[ARTERY],
        so2[VENOUS],
        vented * (1.0 - lungs.dead),
    )
    return (*(np.where(settled, v, np.nan) for v in known), held & settled, settled)


def _newton(problem: _Problem) -> tuple[_State, Array, Some, Some]:
    """Points, level, where VO2 was cut, and which lungs settled; those that have not go on by themselves."""
    state, level = _start(problem)
    held, settled = np.zeros((2, level.size), dtype=bool)
    rest, part, at, on = np.arange(level.size), problem, state, level
    for step in range(1, STEPS + 1):
        last = _step(part, at, on, 1.0 if step <= PATIENCE else 0.5)
        at, on = last.state, last.level
        done = last.settled | last.lost
        if np.count_nonzero(done) < SET_ASIDE * done.size and step < STEPS:
            continue
        news = (*at, on, last.held, last.settled)
        for whole, new in zip((*state, level, held, settled), news, strict=True):
            whole[..., rest] = new
        if done.all():
            break
        late = np.flatnonzero(~done)
        rest, part, at, on = rest[late], part.of(late), _State(*(a[:, late] for a in at)), on[late]
    return state, level, held, settled

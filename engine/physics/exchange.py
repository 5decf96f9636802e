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
each) and solves a 2 x 2 system a lung. Steps are in ln PO2, ln PCO2 and pH, bounded in size. The buffer line
of the lung's blood follows arterial blood one step behind, which leaves about a fiftieth of its error a step.

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
from engine.physics.oxygen import O2_CAPACITY_ML_PER_G, O2_SOLUBILITY_ML_PER_DL_MMHG, po2_from_so2_mmhg

Array = NDArray[np.float64]
Some = NDArray[np.bool_]

LN10 = float(np.log(10.0))
K = 10.0 * CO2_CONSTANT  # mmHg dL/mL: L BTPS of gas against dL STPD of content
ECF_BUFFER = float(standard_base_excess_mmol_per_l(8.4, 0.0) - standard_base_excess_mmol_per_l(7.4, 0.0))

UNITS = 15  # of the V/Q distribution: within 1.1 % of PaO2 and 0.1 mmHg of PaCO2 to SD 1.8
REACH = 3.5  # SD of flow and of ventilation that the units span
VENOUS, ARTERY = -2, -1  # the rows below the units
MOST_EXTRACTED = 0.9  # share of end-capillary O2 the tissues can take; beyond it VO2 falls (numerical guard)
LEAST_NITROGEN = 1e-9  # of inspired gas: keeps blood that meets no gas solvable at FiO2 1.0
DOUGLAS_PH = (6.8, 7.8)  # outside, the red-cell factor of douglas1988 is held: it is singular at 8.142
LARGEST_STEP = 1.0  # of ln PO2 and ln PCO2 in one Newton step
LARGEST_PH_STEP = 0.25
ROUNDS = (3, 1, 2, 4, 8, 40)  # steps before the settled lungs are set aside, again and again
SETTLED = 1e-4  # last step of ln PO2 and ln PCO2: what is left is about its square
LEVEL_SETTLED = 2e-5  # mmol/L, last step of the buffer line: what is left is about a fiftieth
LUNGS_AT_ONCE = 1024  # many enough that the calls cost little, few enough for the processor's cache
START_SOLUBILITY = 4.0  # of CO2 in blood over gas (farhi1967), about 40 mmHg
START_CO2 = 2.45  # mL/dL of CO2 content a mmol/L of bicarbonate, in the alkaline units that need it most
START_HALDANE = 0.35  # mL of CO2 that blood takes up at no cost in PCO2 as it gives off a mL of O2


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
        not ``settled``.
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

    Oxygen: ``capacity`` in mL/dL; ``shift`` of the curve in ln PO2 at pH 7.4 and a PCO2 of 1 mmHg. CO2:
    ``dissolved`` in plasma in mL/dL/mmHg; ``bound`` over dissolved at pH 7.4, and ``bound_z``, the slope of
    its logarithm on pH; ``cells`` as in douglas1988. Whole-blood base excess in mmol/L is ``hco3`` PCO2
    10^(pH - 7.4) + ``buffer`` (pH - 7.4) - ``deoxy`` (1 - S) and a constant.
    """

    capacity: Array
    shift: Array
    dissolved: Array
    bound: Array
    bound_z: Array
    cells: Array
    hco3: Array
    buffer: Array
    deoxy: Array


def _makeup(hb: Array, temperature: Array) -> _Makeup:
    def excess(ph: float, pco2: float, so2: float) -> Array:
        return whole_blood_base_excess_mmol_per_l(ph, pco2, hb, so2)

    nothing, pk = excess(7.4, 0.0, 1.0), co2_pk(7.4, temperature)
    return _Makeup(
        O2_CAPACITY_ML_PER_G * hb,
        0.06 * np.log(40.0) + 0.024 * LN10 * (37.0 - temperature),
        2.226 * co2_solubility_mmol_per_l_mmhg(temperature),
        np.exp(LN10 * (7.4 - pk)),
        LN10 * (1.0 - co2_pk(8.4, temperature) + pk),
        0.0289 * hb,
        excess(7.4, 1.0, 1.0) - nothing,
        excess(8.4, 0.0, 1.0) - nothing,
        nothing - excess(7.4, 0.0, 0.0),
    )


class _State(NamedTuple):
    """Points in blood: ln PO2, ln PCO2 and pH."""

    x: Array
    y: Array
    z: Array


class _Blood(NamedTuple):
    """Blood at some points, and its linear answer to a step once pH follows its buffer line.

    ``o2`` and ``co2`` are contents in mL/dL after the pH correction ``dph`` alone; ``_x`` and ``_y`` are
    slopes on ln PO2 and ln PCO2 along the buffer line, ``so2_z`` that on pH alone.
    """

    po2: Array
    pco2: Array
    so2: Array
    so2_x: Array
    so2_y: Array
    so2_z: Array
    o2: Array
    o2_x: Array
    o2_y: Array
    co2: Array
    co2_x: Array
    co2_y: Array
    dph: Array
    ph_x: Array
    ph_y: Array


def _shift(y: Array, z: Array, makeup: _Makeup) -> Array:
    """What takes ln PO2 of this blood to ln PO2 on the standard curve."""
    return 0.40 * LN10 * (z - 7.4) - 0.06 * y + makeup.shift


def _saturation(standard: Array) -> tuple[Array, Array]:
    """Saturation at ln PO2 on the standard curve, and its slope."""
    p = np.exp(standard)
    square = p * p + 150.0
    cubic = p * square
    so2 = cubic / (cubic + 23_400.0)
    return so2, so2 * (1.0 - so2) * (3.0 - 300.0 / square)


def _blood(state: _State, makeup: _Makeup, level: Array) -> _Blood:
    """Contents and their slopes, on the buffer line of this level."""
    x, y, z = state
    alkali = z - 7.4
    po2, pco2 = np.exp(x), np.exp(y)
    so2, steep = _saturation(x + _shift(y, z, makeup))
    so2_z = 0.40 * LN10 * steep

    hco3 = makeup.hco3 * pco2 * np.exp(LN10 * alkali)
    haldane = makeup.deoxy * steep
    stiff = LN10 * hco3 + makeup.buffer + 0.40 * LN10 * haldane
    misfit = level + makeup.deoxy * (1.0 - so2) - makeup.buffer * alkali - hco3
    dph = _bounded(misfit / stiff, LARGEST_PH_STEP)
    ph_x = -haldane / stiff
    ph_y = (0.06 * haldane - hco3) / stiff
    so2_x = steep + so2_z * ph_x
    so2_y = so2_z * ph_y - 0.06 * steep
    free_o2 = O2_SOLUBILITY_ML_PER_DL_MMHG * po2

    dissolved = makeup.dissolved * pco2
    bound = dissolved * (makeup.bound * np.exp(makeup.bound_z * alkali))
    plasma = dissolved + bound
    held = np.minimum(np.maximum(z, DOUGLAS_PH[0]), DOUGLAS_PH[1])
    of_so2, of_ph = 3.352 - 0.456 * so2, 8.142 - held
    cells = makeup.cells / (of_so2 * of_ph)
    missing = plasma * cells
    content = plasma - missing
    co2_s = -0.456 * missing / of_so2
    co2_z = makeup.bound_z * bound * (1.0 - cells) - missing / of_ph * (z == held) + co2_s * so2_z
    return _Blood(
        po2,
        pco2,
        so2,
        so2_x,
        so2_y,
        so2_z,
        makeup.capacity * (so2 + so2_z * dph) + free_o2,
        makeup.capacity * so2_x + free_o2,
        makeup.capacity * so2_y,
        content + co2_z * dph,
        co2_z * ph_x + co2_s * steep,
        content + co2_z * ph_y - 0.06 * co2_s * steep,
        dph,
        ph_x,
        ph_y,
    )


def _level(y: Array, z: Array, so2: Array, makeup: _Makeup) -> Array:
    """The level of the buffer line through a point."""
    alkali = z - 7.4
    return makeup.hco3 * np.exp(y + LN10 * alkali) + makeup.buffer * alkali - makeup.deoxy * (1.0 - so2)


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

    def of(self, kept: Some) -> "_Problem":
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
    say which pH goes with it. O2 starts from what the gas of a unit can bring.
    """
    lungs, makeup, r, _, weight, _, _, output = problem
    share = START_SOLUBILITY / (START_SOLUBILITY + r)
    venous = K * output / _sum(r * share, weight)
    artery = venous * ((1.0 - lungs.shunt) * _sum(share, weight) + lungs.shunt)
    ph = ph_at_standard_base_excess(artery, lungs.sbe)
    level = _level(np.log(artery), ph, np.full_like(ph, 0.95), makeup)

    here = makeup.hco3 * artery * np.exp(LN10 * (ph - 7.4))
    line = here + makeup.buffer * (ph - 7.4)  # bicarbonate at pH 7.4
    given_off = (lungs.vco2 - START_HALDANE * lungs.vo2 / (1.0 + r)) / (10.0 * lungs.output * START_CO2)
    hco3 = here * (share * venous / artery) ** (makeup.buffer / (LN10 * here + makeup.buffer))
    gas = r / (START_CO2 * K * makeup.hco3) * np.exp(LN10 / makeup.buffer * (hco3 - line))
    excess = hco3 * (gas + 1.0) - np.maximum(here + given_off, 0.1 * here)
    hco3 = hco3 - excess / (gas * (1.0 + LN10 / makeup.buffer * hco3) + 1.0)
    z = 7.4 + (line - hco3) / makeup.buffer
    y = np.log(hco3 / makeup.hco3) - LN10 * (z - 7.4)
    y[ARTERY], z[ARTERY] = np.log(artery), ph
    return _State(_start_of_o2(problem, np.exp(y), _shift(y, z, makeup)), y, z), level


def _start_of_o2(problem: _Problem, pco2: Array, shift: Array) -> Array:
    """First guess of ln PO2: a Newton step of the units for O2 alone, then blood of the contents it gives."""
    lungs, makeup, r, inspired, weight, nitrogen, uptake, _ = problem
    capacity = makeup.capacity
    venous = np.maximum(0.98 * capacity - uptake, 0.2 * capacity)
    brought = inspired - lungs.fio2 * r * pco2
    starved = po2_from_so2_mmhg(_within((venous + (brought - 45.0 * r) / nitrogen) / capacity, 0.3, 0.97))
    x = np.fmax(np.log((brought - nitrogen * (capacity - venous)) / r), np.log(starved) - shift)
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
    shift = shift[VENOUS:]
    carried = np.log(po2_from_so2_mmhg(_within(content / capacity, 0.05, 0.98))) - shift
    ends = np.fmax(carried, np.log((content - capacity) / O2_SOLUBILITY_ML_PER_DL_MMHG))
    for _ in range(2):
        o2, o2_x = _o2(ends, shift, capacity)
        ends = ends + _bounded((content - o2) / o2_x, LARGEST_STEP)
    x[VENOUS:] = ends
    return x


def _o2(x: Array, shift: Array, capacity: Array) -> tuple[Array, Array]:
    """O2 content at ln PO2 and a shift of the curve, and its slope."""
    so2, steep = _saturation(x + shift)
    free = O2_SOLUBILITY_ML_PER_DL_MMHG * np.exp(x)
    return capacity * so2 + free, capacity * steep + free


def _within(values: Array, low: float, high: float) -> Array:
    return np.minimum(np.maximum(values, low), high)


class _Step(NamedTuple):
    """What one Newton step gives. A lung is ``held`` where VO2 was cut and ``lost`` where it ran away."""

    state: _State
    level: Array
    held: Some
    settled: Some
    lost: Some


def _step(problem: _Problem, now: _State, level: Array) -> _Step:
    """One Newton step of all rows and of both mixed venous contents.

    A row's step is linear in the O2 and CO2 that come with its blood. Put into the closing equations that
    leaves a 2 x 2 system a lung for the venous contents; arterial blood then takes the mixed contents.
    """
    lungs, makeup, r, inspired, weight, nitrogen, uptake, output = problem
    b = _blood(now, makeup, level)
    gas_o2, gas_co2 = r * b.po2, r * b.pco2
    made_room = lungs.fio2 * gas_co2
    a11, a12 = gas_o2 + nitrogen * b.o2_x, made_room + nitrogen * b.o2_y
    a21, a22 = K * b.co2_x, gas_co2 + K * b.co2_y
    det = a11 * a22 - a12 * a21  # of a (dx, dy) = f + (nitrogen, K) x contents that come
    x1, x2, y1, y2 = a22 / det, -a12 / det, -a21 / det, a11 / det
    f1 = inspired - gas_o2 - made_room - nitrogen * b.o2
    f2 = -gas_co2 - K * b.co2

    o1, o2 = weight * (b.o2_x * x1 + b.o2_y * y1), weight * (b.o2_x * x2 + b.o2_y * y2)
    c1, c2 = weight * (b.co2_x * x1 + b.co2_y * y1), weight * (b.co2_x * x2 + b.co2_y * y2)
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
    dx, dy = _bounded(f1 * x1 + f2 * x2, LARGEST_STEP), _bounded(f1 * y1 + f2 * y2, LARGEST_STEP)
    dz = b.dph + b.ph_x * dx + b.ph_y * dy
    new = _State(now.x + dx, now.y + dy, now.z + dz)

    rise = b.so2_z[ARTERY] * b.dph[ARTERY] + b.so2_x[ARTERY] * dx[ARTERY] + b.so2_y[ARTERY] * dy[ARTERY]
    so2 = _within(b.so2[ARTERY] + rise, 0.0, 1.0)
    new_level = _level(new.y[ARTERY], _arterial_ph(new, lungs.sbe), so2, makeup)
    moved = np.maximum(np.abs(dx), np.abs(dy)).max(axis=0)
    settled = (moved <= SETTLED) & (np.abs(new_level - level) <= LEVEL_SETTLED)
    return _Step(new, new_level, cut > enough, settled, np.isnan(moved))


def _arterial_ph(state: _State, sbe: Array) -> Array:
    """pH of arterial blood at its standard base excess: a Newton step from where it is."""
    ph, pco2 = state.z[ARTERY], np.exp(state.y[ARTERY])
    misfit = standard_base_excess_mmol_per_l(ph, pco2) - sbe
    return np.asarray(ph - misfit / (LN10 * hco3_mmol_per_l(ph, pco2) + ECF_BUFFER))


def _solve(lungs: _Lungs, units: int) -> tuple[NDArray[Any], ...]:
    """Newton's method on one block of lungs; returns the fields of `Exchange` in order."""
    problem = _laid_out(lungs, units)
    (x, y, z), level, held, settled = _newton(problem)
    ends = _State(x[VENOUS:], y[VENOUS:], z[VENOUS:])
    svo2, sao2 = _blood(ends, problem.makeup, level).so2
    vented = _sum(problem.r * np.exp(y), problem.weight) / _sum(problem.r, problem.weight)
    known = (np.exp(x[ARTERY]), np.exp(y[ARTERY]), z[ARTERY], sao2, svo2, vented * (1.0 - lungs.dead))
    return (*(np.where(settled, v, np.nan) for v in known), held & settled, settled)


def _newton(problem: _Problem) -> tuple[_State, Array, Some, Some]:
    """Points, level, where VO2 was cut, and which lungs settled; those that have not go on by themselves."""
    state, level = _start(problem)
    held, settled = np.zeros((2, level.size), dtype=bool)
    rest, part, at, on = np.arange(level.size), problem, state, level
    for steps in ROUNDS:
        for _ in range(steps):
            last = _step(part, at, on)
            at, on = last.state, last.level
            if (last.settled | last.lost).all():
                break
        news = (*at, on, last.held, last.settled)
        for whole, new in zip((*state, level, held, settled), news, strict=True):
            whole[..., rest] = new
        late = ~(last.settled | last.lost)
        if not late.any():
            break
        rest, part, at, on = rest[late], part.of(late), _State(*(a[:, late] for a in at)), on[late]
    return state, level, held, settled

"""The lung of many units: arterial gas of a steady state, for thousands of lungs at once.

A lung is a true shunt, perfused units whose ventilation-perfusion ratio is log-normal over blood flow, and alveolar
dead space. In every unit gas and end-capillary blood are in equilibrium and oxygen, carbon dioxide and nitrogen
balance; mixed venous contents close the loop, so that the whole lung takes up VO2 and gives off VCO2. Arterial
tensions follow from mixed contents, never from averaged tensions.

Equations, per unit with expired ventilation over flow ``r`` (BTPS over blood) and K = 8.63 mmHg dL/mL::

    CO2   r PCO2 = K (CvCO2 - CcCO2)
    O2    r (PIO2 - PO2 - FiO2 PCO2) = K (1 - FiO2) (CcO2 - CvO2)       nitrogen balance used, right at FiO2 1.0
    pH    whole-blood base excess is one value in the whole lung        (Van Slyke, langzander2002)

and per lung, with flow weights ``w`` and perfused flow (1 - s) Q::

    CvO2  = sum(w CcO2)  - VO2  / (10 (1 - s) Q)
    CvCO2 = sum(w CcCO2) + VCO2 / (10 (1 - s) Q)

Arterial blood keeps its STANDARD base excess (extracellular buffer line, clsi_c46), since the whole body has had time;
blood inside the lung buffers as whole blood, since a capillary transit takes under a second.

Solved by Newton's method on all units, both mixed venous contents and arterial blood together: the unknowns of a unit
meet other units only through the two venous contents, so each step eliminates the units (2 x 2 each) and solves a
2 x 2 system a lung. Steps are in ln PO2, ln PCO2 and pH, bounded in size.

References
----------
west1969 : J. B. West, "Ventilation-perfusion inequality and overall gas exchange in computer models of the lung",
    Respir. Physiol. 7, 88-110, 1969 (the model of many units).
severinghaus1979, kelman1966 : saturation and its shift, see `engine.physics.oxygen`.
douglas1988 : CO2 content of blood, see `engine.physics.carbon_dioxide`.
langzander2002, clsi_c46 : base excess, see `engine.physics.acid_base`.
farhi1967 : L. E. Farhi, "Elimination of inert gas by the lung", Respir. Physiol. 3, 1-11, 1967 (first guess).
"""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from engine.physics.acid_base import ph_at_standard_base_excess
from engine.physics.air import BODY_WATER_VAPOUR_MMHG
from engine.physics.carbon_dioxide import CO2_CONSTANT, co2_pk, co2_solubility_mmol_per_l_mmhg
from engine.physics.oxygen import O2_CAPACITY_ML_PER_G, O2_SOLUBILITY_ML_PER_DL_MMHG, po2_from_so2

Array = NDArray[np.float64]

LN10 = np.log(10.0)
K = 10.0 * CO2_CONSTANT  # mmHg dL/mL: L BTPS of gas against dL STPD of content
UNITS = 15  # of the V/Q distribution: within 1.1 % of PaO2 and 0.1 mmHg of PaCO2 to SD 1.8
REACH = 3.5  # SD of flow and of ventilation that the units span
MOST_EXTRACTED = 0.9  # share of end-capillary O2 the tissues can take; beyond it VO2 falls (numerical guard)
DOUGLAS_PH = (6.8, 7.8)  # outside, the red-cell factor of douglas1988 is held: it is singular at 8.142
LARGEST_STEP = 1.0  # of ln PO2 and ln PCO2 in one Newton step
LARGEST_PH_STEP = 0.25
FEW_STEPS = 5  # of a whole block; the lungs that need more go on by themselves
STEPS = 60
VENOUS_STEPS = 8
SETTLED = 1e-5  # of ln PO2 and ln PCO2: far below any analyser
LEVEL_SETTLED = 1e-4  # mmol/L of the buffer line
LUNGS_AT_ONCE = 512  # a block that stays in the processor's cache


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
        Arrays of the broadcast shape. NaN in, NaN out; a lung that does not converge is NaN and not ``settled``.
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
    shape, columns = given[0].shape, [np.ascontiguousarray(a).reshape(-1) for a in given]
    blocks = [
        _solve(_Lungs(*(c[start : start + LUNGS_AT_ONCE] for c in columns)), units)
        for start in range(0, columns[0].size, LUNGS_AT_ONCE)
    ]
    pao2, paco2, ph, sao2, svo2, alveolar, held, settled = (
        np.concatenate([b[i] for b in blocks]).reshape(shape) for i in range(8)
    )
    return Exchange(pao2, paco2, ph, sao2, svo2, alveolar, held > 0, settled > 0)


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


class _Blood(NamedTuple):
    """Blood at (ln PO2, ln PCO2, pH), and its linear answer to a step once pH follows its buffer line.

    ``so2``, ``o2`` and ``co2`` are values after the pH correction ``dph`` alone; ``_x`` and ``_y`` are slopes on ln PO2
    and ln PCO2 along the buffer line.
    """

    so2: Array
    o2: Array
    o2_x: Array
    o2_y: Array
    co2: Array
    co2_x: Array
    co2_y: Array
    dph: Array
    ph_x: Array
    ph_y: Array


class _Buffer(NamedTuple):
    """``a PCO2 10^(pH - pk) + slope (pH - 7.4) - deoxy (1 - S) = level``: both base-excess equations have this form."""

    a: float
    pk: float
    slope: Array
    deoxy: Array
    level: Array


def _whole_blood(hb: Array, level: Array) -> _Buffer:
    return _Buffer(0.0304, 6.1, 9.5 + 1.63 * hb, 0.2 * hb / (1.0 - 0.0143 * hb), level)


def _whole_blood_level(hb: Array, state: "_State", so2: Array) -> Array:
    """The level of whole blood's buffer line that goes through one arterial point."""
    line = _whole_blood(hb, hb)
    return np.asarray(
        line.a * np.exp(state.y + LN10 * (state.z - line.pk)) + line.slope * (state.z - 7.4) - line.deoxy * (1.0 - so2)
    )


def _blood(state: "_State", hb: Array, temperature: Array, buffer: _Buffer) -> _Blood:
    """Contents in mL/dL and their slopes."""
    x, y, z = state
    pco2 = np.exp(y)
    shift = 0.40 * LN10 * (z - 7.4) + 0.06 * (np.log(40.0) - y) + 0.024 * LN10 * (37.0 - temperature)
    p = np.exp(x + shift)
    cubic = p * (p * p + 150.0)
    so2 = cubic / (cubic + 23_400.0)
    steep = 23_400.0 * p * (3.0 * p * p + 150.0) / (cubic + 23_400.0) ** 2  # dS / d ln P

    bicarbonate = buffer.a * pco2 * np.exp(LN10 * (z - buffer.pk))
    misfit = bicarbonate + buffer.slope * (z - 7.4) - buffer.deoxy * (1.0 - so2) - buffer.level
    stiff = LN10 * bicarbonate + buffer.slope + 0.40 * LN10 * buffer.deoxy * steep
    dph = np.clip(-misfit / stiff, -LARGEST_PH_STEP, LARGEST_PH_STEP)
    ph_x = -buffer.deoxy * steep / stiff
    ph_y = -(bicarbonate - 0.06 * buffer.deoxy * steep) / stiff
    so2_z = 0.40 * LN10 * steep
    so2_x = steep + so2_z * ph_x
    so2_y = -0.06 * steep + so2_z * ph_y

    capacity, dissolved = O2_CAPACITY_ML_PER_G * hb, O2_SOLUBILITY_ML_PER_DL_MMHG * np.exp(x)
    o2 = capacity * (so2 + so2_z * dph) + dissolved

    carried = np.exp(LN10 * (z - co2_pk(z, temperature)))
    plasma = 2.226 * co2_solubility_mmol_per_l_mmhg(temperature) * pco2 * (1.0 + carried)
    plasma_z = plasma * carried / (1.0 + carried) * LN10 * (1.042 + 0.00139 * (38.0 - temperature))
    z_held = np.clip(z, *DOUGLAS_PH)
    of_so2, of_ph = 3.352 - 0.456 * so2, 8.142 - z_held
    cells = 0.0289 * hb / (of_so2 * of_ph)
    co2_z = plasma_z * (1.0 - cells) - plasma * cells / of_ph * (z == z_held)
    co2_s = -plasma * cells * 0.456 / of_so2
    content = plasma * (1.0 - cells)
    co2 = content + co2_z * dph + co2_s * so2_z * dph
    return _Blood(
        so2,
        o2,
        capacity * so2_x + dissolved,
        capacity * so2_y,
        co2,
        co2_z * ph_x + co2_s * so2_x,
        content + co2_z * ph_y + co2_s * so2_y,
        dph,
        ph_x,
        ph_y,
    )


def _nodes(vq_log_sd: Array, units: int) -> tuple[Array, Array]:
    """Standard normal deviates of the units and their share of perfused flow, each (lungs, units).

    Equal steps from -3.5 to 3.5 + SD: blood flow is normal about 0 and ventilation about SD, and both tails count. The
    trapezium rule with Gaussian weights converges faster than any power of the step; at equal count it beat
    Gauss-Hermite nodes threefold here, as it keeps nodes where the knee of the curve lies.
    """
    deviate = -REACH + (2.0 * REACH + vq_log_sd[:, None]) * np.linspace(0.0, 1.0, units)
    weight = np.exp(-0.5 * deviate * deviate)
    return deviate, weight / weight.sum(axis=1, keepdims=True)


def _mean(values: Array, weight: Array) -> Array:
    """Weighted mean over the units of each lung."""
    mean: Array = np.einsum("lu,lu->l", values, weight)
    return mean


class _State(NamedTuple):
    """A point in blood: ln PO2, ln PCO2 and pH."""

    x: Array
    y: Array
    z: Array

    def step(self, b: _Blood, dx: Array, dy: Array) -> "_State":
        """One bounded step; pH follows its buffer line."""
        dx, dy = (np.clip(d, -LARGEST_STEP, LARGEST_STEP) for d in (dx, dy))
        return _State(self.x + dx, self.y + dy, self.z + b.dph + b.ph_x * dx + b.ph_y * dy)

    def towards(self, b: _Blood, o2: Array, co2: Array) -> "_State":
        """One Newton step towards blood of these contents."""
        e1, e2 = o2 - b.o2, co2 - b.co2
        det = b.o2_x * b.co2_y - b.o2_y * b.co2_x
        return self.step(b, (e1 * b.co2_y - e2 * b.o2_y) / det, (e2 * b.o2_x - e1 * b.co2_x) / det)


class _Closing(NamedTuple):
    """What one Newton step of the units means for a lung: mean end-capillary and mixed venous contents."""

    capillary_o2: Array
    capillary_co2: Array
    venous_o2: Array
    venous_co2: Array
    held: NDArray[np.bool_]

    def rows(self, kept: NDArray[np.bool_]) -> "_Closing":
        """The same for some of the lungs."""
        o2, co2, venous_o2, venous_co2, held = self
        return _Closing(o2[kept], co2[kept], venous_o2[kept], venous_co2[kept], held[kept])


class _Problem(NamedTuple):
    """A block of lungs with its units laid out: (lungs, units) arrays, and the a-v differences they must feed."""

    lungs: _Lungs
    r: Array
    weight: Array
    pio2: Array
    uptake: Array
    output: Array

    def rows(self, kept: NDArray[np.bool_]) -> "_Problem":
        """The same problem for some of the lungs."""
        return _Problem(_Lungs(*(a[kept] for a in self.lungs)), *(a[kept] for a in self[1:]))


class _Solution(NamedTuple):
    """Where Newton's method stands, one row a lung: units, arterial blood, closing contents, buffer level, settled."""

    unit: _State
    artery: _State
    closing: _Closing
    level: Array
    settled: NDArray[np.bool_]


def _solve(lungs: _Lungs, units: int) -> tuple[Array, ...]:
    """Newton's method on one block of lungs; returns the fields of `Exchange` in order.

    Most lungs settle within a few steps; the rest go on without them.
    """
    problem = _laid_out(lungs, units)
    with np.errstate(all="ignore"):  # a lung that runs away ends as NaN and is said to be unsettled
        found = _newton(problem, _start(problem), FEW_STEPS)
        late = ~found.settled
        if late.any():
            rest = _newton(problem.rows(late), _rows(found, late), STEPS)
            found = _merged(found, rest, late)
        line = _whole_blood(lungs.hb, found.level)
        so2 = _blood(found.artery, lungs.hb, lungs.temperature, line).so2
        svo2 = _saturation_of_contents(found, lungs, line)
        vented = _mean(problem.r * np.exp(found.unit.y), problem.weight) / _mean(problem.r, problem.weight)
    pao2, paco2, ph = np.exp(found.artery.x), np.exp(found.artery.y), found.artery.z
    known = (pao2, paco2, ph, so2, svo2, vented * (1.0 - lungs.dead))
    held = (found.closing.held & found.settled).astype(float)
    return (*(np.where(found.settled, v, np.nan) for v in known), held, found.settled.astype(float))


def _laid_out(lungs: _Lungs, units: int) -> _Problem:
    deviate, weight = _nodes(lungs.vq_log_sd, units)
    perfused = lungs.output * (1.0 - lungs.shunt)
    spread = np.exp(lungs.vq_log_sd[:, None] * deviate)
    overall = lungs.ventilation * (1.0 - lungs.dead) / perfused
    return _Problem(
        lungs,
        spread * (overall / _mean(spread, weight))[:, None],
        weight,
        (lungs.fio2 * (lungs.barometric - BODY_WATER_VAPOUR_MMHG))[:, None],
        lungs.vo2 / (10.0 * perfused),
        lungs.vco2 / (10.0 * perfused),
    )


def _start(problem: _Problem) -> _Solution:
    """CO2 as a gas of one solubility (farhi1967), O2 by what the unit's gas can bring, pH by a straight line."""
    lungs, r, weight, pio2, uptake, output = problem
    share = 4.0 / (4.0 + r)
    y = np.log(share * (K * output / _mean(r * share, weight))[:, None])
    capacity, free = O2_CAPACITY_ML_PER_G * lungs.hb[:, None], K * (1.0 - lungs.fio2[:, None])
    venous = np.maximum(0.98 * capacity - uptake[:, None], 0.2 * capacity)
    starved = po2_from_so2(np.clip((venous + r * (pio2 - 45.0) / np.maximum(free, 1e-9)) / capacity, 0.3, 0.97))
    x = np.log(np.maximum(pio2 - 1.2 * np.exp(y) - free * (capacity - venous) / r, starved))
    ya = np.log(_mean(r * np.exp(y), weight) / _mean(r, weight))
    z, za = (7.4 - 0.55 * (v - np.log(40.0)) + 0.015 * b for v, b in ((y, lungs.sbe[:, None]), (ya, lungs.sbe)))
    artery = _State(np.full_like(ya, np.log(80.0)), ya, za)
    nothing, level = np.zeros_like(ya), _whole_blood_level(lungs.hb, artery, np.ones_like(ya))
    line = _columns(_whole_blood(lungs.hb, level))
    unit = _State(x, y, np.minimum(z, 7.4 + line.level / line.slope))  # no CO2 left: nothing but fixed buffers
    b = _blood(unit, lungs.hb[:, None], lungs.temperature[:, None], line)
    capillary = _mean(b.o2, weight), _mean(b.co2, weight)
    venous_o2, venous_co2, held = _venous_of_capillary(*capillary, uptake, output)
    return _Solution(unit, artery, _Closing(*capillary, venous_o2, venous_co2, held), level, nothing > 0)


def _newton(problem: _Problem, now: _Solution, steps: int) -> _Solution:
    """Steps of Newton's method until all lungs of the block have settled, or ``steps`` of them."""
    lungs = problem.lungs
    hb, temperature = lungs.hb[:, None], lungs.temperature[:, None]
    for _ in range(steps):
        line = _whole_blood(lungs.hb, now.level)
        a = _blood(now.artery, lungs.hb, lungs.temperature, line)
        b = _blood(now.unit, hb, temperature, _columns(line))
        unit, closing = _unit_step(problem, now.unit, b, now.closing)
        artery = now.artery.towards(
            a,
            (1.0 - lungs.shunt) * closing.capillary_o2 + lungs.shunt * closing.venous_o2,
            (1.0 - lungs.shunt) * closing.capillary_co2 + lungs.shunt * closing.venous_co2,
        )
        ph = ph_at_standard_base_excess(np.exp(artery.y), lungs.sbe)
        level = _whole_blood_level(lungs.hb, artery._replace(z=ph), a.so2)
        moved = np.maximum(_moved(unit, now.unit).max(axis=1), _moved(artery, now.artery))
        settled = np.asarray((moved <= SETTLED) & (np.abs(level - now.level) <= LEVEL_SETTLED))
        now = _Solution(unit, artery, closing, level, settled)
        if settled.all():
            break
    return now


def _moved(new: _State, old: _State) -> Array:
    return np.maximum(np.abs(new.x - old.x), np.abs(new.y - old.y))


def _rows(found: _Solution, kept: NDArray[np.bool_]) -> _Solution:
    return _Solution(
        _State(*(a[kept] for a in found.unit)),
        _State(*(a[kept] for a in found.artery)),
        found.closing.rows(kept),
        found.level[kept],
        found.settled[kept],
    )


def _merged(found: _Solution, rest: _Solution, late: NDArray[np.bool_]) -> _Solution:
    """The solution with the late lungs' rows put in."""
    for whole, part in zip(
        (*found.unit, *found.artery, *found.closing, found.level, found.settled),
        (*rest.unit, *rest.artery, *rest.closing, rest.level, rest.settled),
        strict=True,
    ):
        whole[late] = part
    return found


def _columns(line: _Buffer) -> _Buffer:
    """A buffer line a lung, as columns against units."""
    return line._replace(slope=line.slope[:, None], deoxy=line.deoxy[:, None], level=line.level[:, None])


def _unit_step(problem: _Problem, unit: _State, b: _Blood, before: _Closing) -> tuple[_State, _Closing]:
    """One Newton step of all units and of both mixed venous contents.

    A unit's step is a constant plus its answers to a step of the two venous contents; put into the closing equations
    that leaves a 2 x 2 system a lung.
    """
    lungs, r, weight, pio2, uptake, output = problem
    fio2, venous_o2, venous_co2 = lungs.fio2[:, None], before.venous_o2, before.venous_co2
    po2, pco2, free = np.exp(unit.x), np.exp(unit.y), K * (1.0 - fio2)
    f1 = r * (pio2 - po2 - fio2 * pco2) - free * (b.o2 - venous_o2[:, None])
    f2 = r * pco2 - K * (venous_co2[:, None] - b.co2)
    a11, a12 = -r * po2 - free * b.o2_x, -r * fio2 * pco2 - free * b.o2_y
    a21, a22 = K * b.co2_x, r * pco2 + K * b.co2_y
    det = a11 * a22 - a12 * a21
    alone = (-f1 * a22 + f2 * a12) / det, (-f2 * a11 + f1 * a21) / det
    per_o2 = -free * a22 / det, free * a21 / det
    per_co2 = -K * a12 / det, K * a11 / det

    def mean(step: tuple[Array, Array]) -> tuple[Array, Array]:
        dx, dy = step
        return _mean(b.o2_x * dx + b.o2_y * dy, weight), _mean(b.co2_x * dx + b.co2_y * dy, weight)

    (o, c), (oo, co), (oc, cc) = mean(alone), mean(per_o2), mean(per_co2)
    capillary_o2, capillary_co2 = _mean(b.o2, weight) + o, _mean(b.co2, weight) + c
    want_o2, want_co2, held = _venous_of_capillary(capillary_o2, capillary_co2, uptake, output)
    left = np.where(held, 1.0 - MOST_EXTRACTED, 1.0)
    g1, g2 = want_o2 - venous_o2, want_co2 - venous_co2
    m11, m12, m21, m22 = 1.0 - left * oo, -left * oc, -co, 1.0 - cc
    det = m11 * m22 - m12 * m21
    do2, dco2 = (g1 * m22 - g2 * m12) / det, (g2 * m11 - g1 * m21) / det
    dx, dy = (alone[i] + per_o2[i] * do2[:, None] + per_co2[i] * dco2[:, None] for i in (0, 1))
    closing = _Closing(
        capillary_o2 + oo * do2 + oc * dco2,
        capillary_co2 + co * do2 + cc * dco2,
        venous_o2 + do2,
        venous_co2 + dco2,
        held,
    )
    return unit.step(b, dx, dy), closing


def _venous_of_capillary(
    o2: Array, co2: Array, uptake: Array, output: Array
) -> tuple[Array, Array, NDArray[np.bool_]]:
    """Mixed venous contents that belong to mean end-capillary contents, and where O2 uptake had to be cut."""
    least = (1.0 - MOST_EXTRACTED) * o2
    held = np.asarray(o2 - uptake < least)
    return np.where(held, least, o2 - uptake), co2 + output, held


def _saturation_of_contents(found: _Solution, lungs: _Lungs, line: _Buffer) -> Array:
    """Saturation of mixed venous blood from its contents."""
    artery, closing = found.artery, found.closing
    state = _State(np.full_like(artery.x, np.log(40.0)), artery.y + 0.1, artery.z - 0.03)
    for _ in range(VENOUS_STEPS):
        b = _blood(state, lungs.hb, lungs.temperature, line)
        state = state.towards(b, closing.venous_o2, closing.venous_co2)
    return _blood(state, lungs.hb, lungs.temperature, line).so2

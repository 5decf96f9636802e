"""Textbook numbers of acid and base: bicarbonate and standard base excess."""

from engine.checks.moment import Moment, at_37, base_excess_mmol_per_l, bicarbonate_mmol_per_l
from engine.estimates.row import Estimate

_C46 = "CLSI C46"


def bicarbonate(moment: Moment) -> Estimate:
    """Bicarbonate of plasma."""
    ph, paco2_mmhg, _ = at_37(moment.gas)
    value = bicarbonate_mmol_per_l(moment.gas)
    return Estimate(
        name="hco3_mmol_per_l",
        value=value,
        unit="mmol/L",
        equation="HCO3 = 0.0307 x PaCO2 x 10^(pH - 6.105)",
        working=f"0.0307 x {paco2_mmhg:.4g} x 10^({ph:.2f} - 6.105) = {value:.1f} mmol/L",
        source=_C46,
        assumes="pH and PaCO2 at 37 C; constants in print differ by 4.5 %",
    )


def standard_base_excess(moment: Moment) -> Estimate:
    """Base excess of the extracellular fluid."""
    ph, hco3, value = (
        at_37(moment.gas).ph,
        bicarbonate_mmol_per_l(moment.gas),
        base_excess_mmol_per_l(moment.gas),
    )
    return Estimate(
        name="standard_base_excess_mmol_per_l",
        value=value,
        unit="mmol/L",
        equation="SBE = HCO3 - 24.8 + 16.2 x (pH - 7.40)",
        working=f"{hco3:.1f} - 24.8 + 16.2 x ({ph:.2f} - 7.40) = {value:+.1f} mmol/L",
        source=_C46,
        assumes="a normal gas reads -0.6 by these constants, not 0",
    )

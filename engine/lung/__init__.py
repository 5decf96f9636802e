"""What is believed about one lung: its parameters, their priors, how they drift, what gas they give.

`breathing` reads off the chart what drives gas exchange at one moment; `prior` says what is believed before
the first gas; `drift` how far a lung may have moved between two moments; `arterial` which gas a belief gives
under a breathing; `settling` a gas drawn before that one is reached.

References
----------
aboab2006 : J. Aboab et al., Intensive Care Med. 32, 1979, 2006 (pure oxygen at low PEEP).
bell2022 : J. Bell et al., J. Intensive Care Med. 37, 883, 2022 (prone position).
briscoe1954 : W. A. Briscoe et al., J. Appl. Physiol. 7, 27, 1954 (very small breaths; from memory).
campbell2000 : R. S. Campbell et al., Respir. Care 45, 306, 2000 (device dead space).
cardus1997 : J. Cardus et al., J. Appl. Physiol., 1997 (V/Q spread of healthy adults).
fletcher1984 : R. Fletcher, B. Jonson, Br. J. Anaesth. 56, 109, 1984 (dead space and tidal volume).
goligher2014 : E. C. Goligher et al., Am. J. Respir. Crit. Care Med. 190, 70, 2014 (oxygenation after PEEP).
haudebourg2022 : A.-F. Haudebourg et al., Crit. Care 26, 185, 2022 (rate swapped for volume).
hess1992, thorson1983 : J. Clin. Monit. 8, 111, 1992; Chest 84, 14, 1983 (repeat gases of stable patients).
kagan2018, stapel2015 : Crit. Care 22, 186, 2018; Crit. Care 19, 370, 2015 (measured energy expenditure).
kiiski1992 : R. Kiiski et al., Am. Rev. Respir. Dis. 146, 1131, 1992 (dead space and tidal volume in ARDS).
maggiore2003 : S. M. Maggiore et al., Am. J. Respir. Crit. Care Med. 167, 1215, 2003 (suction).
nuckton2002 : T. J. Nuckton et al., N. Engl. J. Med. 346, 1281, 2002 (dead space in early ARDS).
nunn1960 : J. F. Nunn, D. W. Hill, J. Appl. Physiol. 15, 383, 1960 (dead space under anaesthesia).
prat2003 : G. Prat et al., Intensive Care Med. 29, 2211, 2003 (device dead space).
rousing2016 : M. L. Rousing et al., Ann. Intensive Care 6, 16, 2016 (respiratory quotient).
"""

from engine.lung.arterial import Ventilation, arterial_gas, ventilation
from engine.lung.breathing import Breathing, breathing_at, own_rate_of
from engine.lung.drift import Drift, drift_between
from engine.lung.prior import PARAMETERS, Belief, Prior, prior_of
from engine.lung.settling import Gas, gas_on_the_way, settled_gas

__all__ = [
    "PARAMETERS",
    "Belief",
    "Breathing",
    "Drift",
    "Gas",
    "Prior",
    "Ventilation",
    "arterial_gas",
    "breathing_at",
    "drift_between",
    "gas_on_the_way",
    "own_rate_of",
    "prior_of",
    "settled_gas",
    "ventilation",
]

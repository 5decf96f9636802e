"""The engine's own sentences, with their gas tensions in the unit of the house."""

import re

from dashboard.wording.units import Units

_NUMBER = r"\d+(?:,\d{3})*(?:\.\d+)?"
_SIGNED = rf"[-+−]?{_NUMBER}"
_TENSION = re.compile(rf"(?<![\w.,])({_SIGNED}(?:(?: to |, SD |-|–){_SIGNED})?) mmHg\b")
_CLAUSE_ENDS = re.compile(r"(?<=[.;?]) ")


def sentence_text(says: str, units: Units) -> str:
    """What the engine says, with every gas tension in the unit of the house.

    Parameters
    ----------
    says : str
        Plain text, tensions in mmHg: "62 mmHg", "28 to 34 mmHg", "-16 to 47 mmHg", "28-32 mmHg", or a mean
        and its spread, "0.9, SD 3.6 mmHg". Differences of tensions convert like tensions; signs stay.
    units : Units
        In mmHg the text comes back as it is.

    Returns
    -------
    text : str
        In kPa each such number to one decimal, as everywhere on the screen.

    Notes
    -----
    Two things keep their mmHg. Barometric pressure, which no unit switch of a blood gas turns: a clause (up
    to a full stop, semicolon or question mark) that names it stays as it is. And a text that itself speaks of
    kPa, such as the question whether a gas was typed in the wrong unit: it quotes what was charted and makes
    sense only so. Meant for what is said, not for workings, where one number may stand in several units.
    """
    if units.gas == "mmHg" or "kPa" in says:
        return says
    return " ".join(
        clause
        if "barometric" in clause.lower()
        else _TENSION.sub(lambda found: _turned(found, units), clause)
        for clause in _CLAUSE_ENDS.split(says)
    )


def _turned(found: re.Match[str], units: Units) -> str:
    def one(number: re.Match[str]) -> str:
        return units.tension_text(float(number[0].replace(",", "")))

    return f"{re.sub(_NUMBER, one, found[1])} {units.gas}"

"""Numbers as a hand types them: comma or point, read one way or not at all.

The stock number field drops a decimal comma and turns 7,4 into 74; here every number is typed as text, read
by `read`, and what is not clear is asked, never guessed.
"""

import re
from dataclasses import dataclass

from dashboard.wording import Field

_NUMBER = re.compile(r"[0-9]+(?:[.,][0-9]+)?|[.,][0-9]+")
_LOOKS_GROUPED = re.compile(r"[1-9][0-9]{0,2}[.,][0-9]{3}")


class Unclear(ValueError):
    """A text that is not used: ``says`` is one plain sentence for the screen, naming what was understood."""

    def __init__(self, says: str) -> None:
        self.says = says
        super().__init__(says)


@dataclass(frozen=True, slots=True, kw_only=True)
class Typed:
    """A number that was read.

    ``value`` in the engine's unit (FiO2 a fraction), ``None`` for an empty field; ``says`` what was
    understood.
    """

    value: float | None
    says: str


def read(text: str, field: Field) -> Typed:
    """Read what was typed into ``field``.

    Parameters
    ----------
    text : str
        Digits with at most one comma or point as the decimal mark; blanks around it and the field's own unit
        behind it are allowed. Empty means: as charted.
    field : Field
        Gives label, unit, scale between screen and engine, and the possible range.

    Returns
    -------
    Typed

    Raises
    ------
    Unclear
        Not a number; a number outside the possible range; 0.5 in a per-cent field, where 50 may be meant;
        1,250 where both 1.25 and 1250 are possible, or in a field of whole numbers.
    """
    bare = _without_unit(text, field)
    if not bare:
        return Typed(value=None, says="as charted")
    if not _NUMBER.fullmatch(bare):
        raise Unclear(f"“{_shortened(text)}” is not one number. Use digits and at most one comma or point.")
    shown = float(bare.replace(",", "."))
    _ask_about_groups(bare, shown, field)
    _ask_about_fractions(bare, shown, field)
    if not field.low <= field.from_screen(shown) <= field.high:
        raise Unclear(
            f"{field.label} {shown:g}{field.unit_after_number} cannot be: expected {field.range_text}."
        )
    value = field.from_screen(shown)
    return Typed(value=value, says=f"read as {field.with_unit(value)}")


def _without_unit(text: str, field: Field) -> str:
    bare = text.strip().lower()
    unit = field.unit.lower()
    return bare.removesuffix(unit).strip() if unit else bare


def _shortened(text: str) -> str:
    text = " ".join(text.split())
    return text if len(text) <= 20 else text[:19] + "…"


def _ask_about_groups(bare: str, shown: float, field: Field) -> None:
    """1,250 is 1.25 to one reader and 1250 to the next.

    Where values are whole numbers, nobody types three decimals: it is asked even if 1250 cannot be.
    """
    if not _LOOKS_GROUPED.fullmatch(bare):
        return
    whole = float(re.sub("[.,]", "", bare))
    possible = field.low <= field.from_screen(whole) <= field.high
    if field.digits == 0 and not possible:
        raise Unclear(
            f"“{bare}”: thousands or decimals? {whole:g}{field.unit_after_number} cannot be, expected "
            f"{field.range_text}; for {shown:g} type {shown:g}."
        )
    if possible:
        raise Unclear(
            f"“{bare}” could be {shown:g} or {whole:g}. Type it without the mark: {whole:g}, or {shown:g}."
        )


def _ask_about_fractions(bare: str, shown: float, field: Field) -> None:
    """0.5 in a per-cent field may be a fraction; 1 may be 100 %. Ask, since guessing hides the slip."""
    if field.scale == 100 and 0 < shown <= 1:
        raise Unclear(
            f"{field.label} is in per cent here, and {bare} % cannot be. "
            f"If you mean the fraction {bare}, type {shown * 100:g}."
        )


def stepped(value: float | None, direction: int, field: Field) -> float:
    """The value one step up (``direction`` 1) or down (-1), held inside the possible range.

    ``None`` starts from the low end of the range. Steps are taken on the screen's scale, so that 35 % and 5 %
    make exactly 40 %.
    """
    shown = field.to_screen(field.low if value is None else value) + direction * field.step
    return min(max(field.from_screen(round(shown, 6)), field.low), field.high)

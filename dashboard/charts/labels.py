"""Where a label beside a point has room."""

from collections.abc import Sequence

_SIDES = {
    "top center": (0.0, 0.045),
    "bottom center": (0.0, -0.045),
    "middle right": (0.065, 0.0),
    "middle left": (-0.065, 0.0),
    "top right": (0.055, 0.035),
    "top left": (-0.055, 0.035),
    "bottom right": (0.055, -0.035),
    "bottom left": (-0.055, -0.035),
}
_WIDER_THAN_HIGH = 2.2  # a clock time is about that much wider than high


def free_sides(places: Sequence[tuple[float, float]]) -> list[str]:
    """For each point, the side on which its label keeps farthest from the other points and the labels already
    set.

    Parameters
    ----------
    places : sequence of (across, up)
        Where the points lie in the picture, 0 to 1 both ways. The last point, the latest gas, chooses first.

    Returns
    -------
    sides : list of str
        One text position a point, in the order given.
    """
    sides = [""] * len(places)
    taken: list[tuple[float, float]] = []
    for number in reversed(range(len(places))):
        others = [place for other, place in enumerate(places) if other != number] + taken

        def room(
            side: str, here: tuple[float, float] = places[number], others: list[tuple[float, float]] = others
        ) -> float:
            x, y = here[0] + _SIDES[side][0], here[1] + _SIDES[side][1]
            outside = not (0.06 < x < 0.94 and 0.04 < y < 0.97)
            gaps = [((x - u) / _WIDER_THAN_HIGH) ** 2 + (y - v) ** 2 for u, v in others]
            return min(gaps, default=1.0) - (10.0 if outside else 0.0)

        sides[number] = max(_SIDES, key=room)
        dx, dy = _SIDES[sides[number]]
        taken.append((places[number][0] + dx, places[number][1] + dy))
    return sides

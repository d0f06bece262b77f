"""The colours of maps and sections; knows no QGIS.

The first eight are those Okabe and Ito (2008) proposed to be told apart by people with
any kind of colour vision. The ramp passes through them from shallow to deep and grows
darker all the way, so that it reads in grey as well.
"""

__all__ = [
    "BLACK",
    "BLUE",
    "GREEN",
    "GREY",
    "HORIZON_COLOURS",
    "ORANGE",
    "PURPLE",
    "RAMP",
    "SKY",
    "VERMILLION",
    "WHITE",
    "YELLOW",
    "ramp_colour",
]

BLACK = "#000000"
ORANGE = "#e69f00"
SKY = "#56b4e9"
GREEN = "#009e73"
YELLOW = "#f0e442"
BLUE = "#0072b2"
VERMILLION = "#d55e00"
PURPLE = "#cc79a7"
GREY = "#8c8c8c"
WHITE = "#ffffff"

#: Colours of horizons in turn; vermillion stays with the fault.
HORIZON_COLOURS = (GREEN, SKY, PURPLE, ORANGE, BLUE)

#: Elevation: 0 is the lowest, 1 the highest.
RAMP = (
    (0.0, "#0b1a3a"),
    (0.25, "#27408b"),
    (0.5, "#8a3a80"),
    (0.75, VERMILLION),
    (1.0, ORANGE),
)


def ramp_colour(fraction):
    """Give the colour of the elevation ramp at a fraction of the range.

    Parameters
    ----------
    fraction : float
        0 at the lowest elevation, 1 at the highest; beyond them the end colour.

    Returns
    -------
    str
        As ``#rrggbb``.

    Examples
    --------
    >>> ramp_colour(1.0), ramp_colour(-5)
    ('#e69f00', '#0b1a3a')
    """
    fraction = min(max(fraction, 0.0), 1.0)
    upper = next(i for i, (at, _) in enumerate(RAMP) if at >= fraction)
    if upper == 0:
        return RAMP[0][1]
    (low, first), (high, last) = RAMP[upper - 1], RAMP[upper]
    part = (fraction - low) / (high - low)
    mixed = (
        round(a + part * (b - a)) for a, b in zip(_channels(first), _channels(last))
    )
    return "#" + "".join(f"{value:02x}" for value in mixed)


def _channels(colour):
    return [int(colour[i : i + 2], 16) for i in (1, 3, 5)]

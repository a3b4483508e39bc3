"""Words for natural modes: the same number reads the same in tables, pictures and reports."""

from __future__ import annotations

UNNUMBERED = "unnumbered mode"
UNIFORM = "uniform current"


def half_wave_label(half_waves: int) -> str:
    """Return the length of a mode's current in wavelengths: ``1/2 wave``, ``1 wave``, ``3/2 wave``.

    Parameters
    ----------
    half_waves : int
        Half waves of current along the tip-to-tip path; 0 for the current of a closed loop that
        nowhere reverses; negative where the store has no number for the mode.
    """
    if half_waves < 0:
        return UNNUMBERED
    if half_waves == 0:
        return UNIFORM
    whole, half = divmod(half_waves, 2)
    if half:
        return f"{half_waves}/2 wave"
    return "1 wave" if whole == 1 else f"{whole} waves"

"""Words for natural modes: the same number reads the same in tables, pictures and reports."""

from __future__ import annotations

from fractions import Fraction

UNNUMBERED = "cable mode"
"""A mode that lives on the feed cable: half waves are counted along the strips."""
UNIFORM = "uniform current"


def half_wave_label(half_waves: int, on_plane: bool = False) -> str:
    """Return the length of a mode's current in wavelengths: ``1/2 wave``, ``1 wave``, ``3/2 wave``.

    On a ground plane it is that of the metal without its image: ``1/4 wave``, ``3/4 wave``.

    Parameters
    ----------
    half_waves : int
        Half waves of current along the tip-to-tip path; 0 for the current of a closed loop that
        nowhere reverses; negative for a mode of the feed cable, which has no number.
    on_plane : bool
        The path stands on a ground plane (`path_on_plane` of the store), so that `half_waves`
        counts those of the path and its image.
    """
    if half_waves < 0:
        return UNNUMBERED
    if half_waves == 0:
        return UNIFORM
    length = Fraction(half_waves, 4 if on_plane else 2)
    return f"{length} wave{'s' if length > 1 and length.denominator == 1 else ''}"

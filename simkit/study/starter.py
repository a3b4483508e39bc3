"""The commented study that a new user starts from."""

from __future__ import annotations

import json
from os import PathLike
from pathlib import Path

from simkit.errors import Problem, StudyError

DEFAULT_TITLE = "Strip dipole, 868 MHz"

_TEXT = """\
# A study: what to build, what to vary, what to find out. Lines after # are notes for you.
#
#   simkit check @file@    says what simkit understood
#   simkit run @file@      solves and draws it
#
# Before metal is cut and power is switched on:
#
# - Transmitting needs a licence, or a band that is free of licences where you are, and both come
#   with limits on power and field strength. 868 MHz is such a band in much of Europe, but not
#   everywhere.
# - Field strength near people: ICNIRP 2020 gives 4.3 W/m2 at 868 MHz as reference level for the
#   public, averaged over 30 minutes and the body. In the far field it is reached at the distance
#   sqrt(EIRP / (4 pi * 4.3 W/m2)): 3 cm for 40 mW, 19 cm for 2 W. These are estimates and fail
#   close to the antenna. Local rules and qualified people decide, not this file.
# - Never transmit into a network analyser: it breaks. Take the transmitter off first.
# - Keep test antennas, their masts and cables clear of power lines.
# - The edges of cut sheet are sharp: gloves on, then file them. Do not breathe soldering fumes.
# - Solder before gluing metal to plastic: the plastic softens, and its fumes are no better.
#
# A quantity is text with its unit ("76 mm", "0.868 GHz") or an expression of the names in [values]
# ("gap/2 + 3 mm"; + - * / **, parentheses, pi, sqrt sin cos tan exp log min max). Only pure numbers
# stand without quotes. Lengths may be in mm, cm, m, in or mil.

title = @title@

[values]
arm   = "76 mm"     # length of each strip
width = "8 mm"
gap   = "2 mm"      # between the strips, where the cable is connected

# Each strip follows a path of [x, y] points, its centre line, in the plane of the sheet.
[[strip]]
name  = "east"
path  = [["gap/2", "0 mm"], ["gap/2 + arm", "0 mm"]]
width = "width"

# A strip may be the mirror image of another: at x = 0, or with axis = "x" at y = 0.
[[strip]]
name   = "west"
mirror = "east"

# Strips of other shapes; those that touch are joined. A list of widths is a taper, one width per
# point of a path. smooth = true bends the path as a thin lath round its points. A curve gives x and
# y for t along it. rotate turns a strip about [0, 0], then shift moves it. For instance:
# [[strip]]
# name   = "tapered"
# path   = [["0 mm", "150 mm"], ["30 mm", "160 mm"], ["60 mm", "150 mm"]]
# width  = ["6 mm", "9 mm", "4 mm"]
# smooth = true
# [[strip]]
# name   = "sagging"
# curve  = { x = "t*80 mm", y = "-9 mm * (1 - exp(-4*t**2))", t = [0, 1], points = 60 }
# width  = "5 mm"
# shift  = ["0 mm", "-150 mm"]
# [[strip]]
# name   = "bow"
# arc    = { centre = ["0 mm", "0 mm"], radius = "50 mm", from = "-60 deg", to = "60 deg" }
# width  = "5 mm"
# rotate = "5 deg"
# shift  = ["200 mm", "0 mm"]

# Copper, brass, aluminium, phosphor bronze, tin, stainless steel ..., or conductivity = "1.5e7 S/m"
# in place of material. Without this table the metal is perfect.
[metal]
material  = "brass"
thickness = "0.15 mm"

# The plastic the strips are glued to, from the table of materials or by permittivity = 2.7 and
# loss_tangent = 0.01 of the solid. infill is the solid part, skins included, best by weighing.
# Further keys: skin (solid, at the bottom and the top), mixing ("maxwell-garnett", "bruggeman",
# "series", "parallel"), side ("below", "both", or "embedded" with depth) and offset (of the strip
# from the carrier's middle).
# [carrier]
# material     = "ASA"
# infill       = 0.4
# thickness    = "2.4 mm"
# overhang     = "2 mm"     # beyond each edge of the strip, sideways
# end_overhang = "0 mm"     # beyond its open ends

# Turn the strips about the x, the y and the z axis, in this order, then lift them.
# [placement]
# rotate_x = "90 deg"
# shift    = ["0 mm", "0 mm", "300 mm"]

# What lies below z = 0: a perfect plane, or earth. Left out, the antenna is in free space.
# [ground]
# kind         = "earth"    # or "plane", without the two lines below
# permittivity = 13
# conductivity = "5 mS/m"

# The source bridges two strip ends. For a cut across one strip write instead, for instance,
# strip = "loop", at = "12 mm" (along its path); the cut is a tenth of the width, or gap = "1 mm".
[feed]
from = "west.start"
to   = "east.start"

# What lies between the feed and the connector, item by item from the antenna on: "line", "stub",
# "tapped-line" (of two-strips, strip-over-plate, coplanar-strips, coaxial or uniform line),
# "resistor", "inductor", "capacitor", "transformer" (a balun is one) and "port-extension". Without
# any the connector sits at the feed. By its name an item can be swept: feedline.pair.length
# [[feedline]]
# kind       = "line"
# name       = "pair"
# length     = "30 mm"
# line       = "two-strips"  # face to face, of the metal above
# width      = "6 mm"
# separation = "3 mm"
# [[feedline]]
# kind   = "stub"            # across the line, shorted at its end
# length = "15 mm"
# like   = "pair"

# Dips, VSWR and return loss are those at the connector and refer to this resistance.
[connector]
reference = "50 ohm"

[frequency]
start  = "300 MHz"
stop   = "3 GHz"
points = 1351

# What to vary: names of [values], or keys such as "metal.thickness". All combinations are solved.
# Leave the table out to solve the antenna above alone.
[sweep]
arm   = { from = "70 mm", to = "82 mm", count = 3 }
width = ["4 mm", "8 mm"]

# How strips become wires: "line" (one wire a strip), "grid" (rails with ties) or "auto", which
# chooses and says why. converge = true refines every case to estimate its error, and takes longer.
# [model]
# kind     = "auto"
# converge = true

# To take the values in step instead of in all combinations:
# [sampling]
# method = "list"

# Once a build is measured, name its one-port Touchstone file and the build as it was really cut:
# [[measured]]
# file = "build_1.s1p"
# arm  = "75.4 mm"
"""


def starter_text(title: str = DEFAULT_TITLE, file: str = "STUDY.toml") -> str:
    """Return the text of a study to start from.

    Parameters
    ----------
    title : str
        Title of the study; replaced by a plain one if it is not one printable line.
    file : str
        Name the comments call the file by.
    """
    if not title.strip() or len(title) > 200 or not title.isprintable():
        title = DEFAULT_TITLE
    if not file.isprintable():
        file = "STUDY.toml"
    quoted = json.dumps(title.strip(), ensure_ascii=False)
    return _TEXT.replace("@title@", quoted, 1).replace("@file@", file, 2)


def write_starter(path: str | PathLike[str], title: str | None = None) -> Path:
    """Write a study to start from; never overwrites.

    Parameters
    ----------
    path : path-like
        ``.toml`` is added if the name has no such ending.
    title : str, optional
        The file's name with spaces for underscores if left out.

    Returns
    -------
    Path
        The file written.

    Raises
    ------
    StudyError
        If the file exists or cannot be written.
    """
    path = Path(path)
    if path.suffix != ".toml":
        path = path.with_name(path.name + ".toml") if path.name else path
    text = starter_text(title or path.stem.replace("_", " "), path.as_posix())
    try:
        with path.open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except FileExistsError:
        what = "exists already and is left as it is; choose another name"
        raise StudyError(str(path), [Problem(what)]) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or error
        what = f"cannot be written: {reason}; choose a folder that exists and is yours"
        raise StudyError(str(path), [Problem(what)]) from error
    return path

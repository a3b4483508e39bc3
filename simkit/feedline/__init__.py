"""Lines, stubs and networks between the antenna's terminals and the connector, and their design."""

from __future__ import annotations

from simkit.feedline.bound import MatchBound, match_bound
from simkit.feedline.build import build_chain
from simkit.feedline.chain import Chain, ChainResult
from simkit.feedline.checks import FeedlineError
from simkit.feedline.dips import connector_dips
from simkit.feedline.elements import (
    Element,
    LineSection,
    Lumped,
    PortExtension,
    Stub,
    TappedLine,
    Transformer,
)
from simkit.feedline.line import Line, LineValues
from simkit.feedline.lines import CoplanarStrips, StripOverPlate, TwoStrips, width_for
from simkit.feedline.match import best_tap, find_matches, worst_return_loss_db
from simkit.feedline.oneport import OnePort
from simkit.feedline.parts import PartSupply
from simkit.feedline.report import Design, MatchReport
from simkit.feedline.round_lines import Coaxial, UniformLine
from simkit.feedline.solutions import l_solutions, quarter_solutions, stub_solutions

__all__ = [
    "Chain",
    "ChainResult",
    "Coaxial",
    "CoplanarStrips",
    "Design",
    "Element",
    "FeedlineError",
    "Line",
    "LineSection",
    "LineValues",
    "Lumped",
    "MatchBound",
    "MatchReport",
    "OnePort",
    "PartSupply",
    "PortExtension",
    "StripOverPlate",
    "Stub",
    "TappedLine",
    "Transformer",
    "TwoStrips",
    "UniformLine",
    "best_tap",
    "build_chain",
    "connector_dips",
    "find_matches",
    "l_solutions",
    "match_bound",
    "quarter_solutions",
    "stub_solutions",
    "width_for",
    "worst_return_loss_db",
]

"""The solver's modules import each other by plain name, as they do when run as scripts."""

from __future__ import annotations

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

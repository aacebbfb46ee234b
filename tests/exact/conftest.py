"""Makes the reference solver importable by the tests beside it, which pytest's importlib mode does not."""

from __future__ import annotations

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

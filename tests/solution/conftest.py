"""Makes this folder's helpers (meshed.py, bound_models.py) importable under pytest's importlib mode."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

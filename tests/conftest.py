"""Puts this folder on the path, so that tests can share modules: pytest's importlib mode leaves it off."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

"""Shared settings: helper modules beside the tests can be imported from every folder."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))

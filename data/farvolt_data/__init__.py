"""Reference tables, rulebooks, device types and example plans, each with its source beside it."""

from pathlib import Path

ROOT = Path(__file__).parent
"""The folder that holds the tables; read-only."""

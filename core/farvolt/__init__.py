"""Farvolt: plans low-voltage DC wiring. The library: model, physics, checks.

The stages, in the order the data takes: `planfile` (file to plan), `plan`, `network`, `solve`, `checks`.
"""

__version__ = "0.1.0"

"""The checks: each a small pure function from a `Context` to findings, registered under its rule.

Adding a check touches one file: every module in this folder is read, and what it registers is run.
"""

import importlib
import pkgutil
from collections.abc import Collection

from farvolt.checks.registry import Check, check, registered
from farvolt.context import Context
from farvolt.results import Finding

_SEVERITIES = ("fail", "warn", "note")


def run_all(context: Context) -> tuple[Finding, ...]:
    """All findings of all checks, worst first, then in the order of the plan."""
    found = [finding for one in checks() for finding in one.run(context)]
    return tuple(sorted(found, key=lambda finding: _SEVERITIES.index(finding.severity)))


def run_some(context: Context, rules: Collection[str]) -> tuple[Finding, ...]:
    """The findings under some rules, of the checks that report under them."""
    found = [one for each in checks() if not set(rules).isdisjoint(each.rules) for one in each.run(context)]
    return tuple(one for one in found if one.rule in rules)


def checks() -> tuple[Check, ...]:
    """Every check, by module and then in the order of its text."""
    for module in sorted(pkgutil.iter_modules(__path__), key=lambda module: module.name):
        importlib.import_module(f"{__name__}.{module.name}")
    return registered()


__all__ = ["Check", "check", "checks", "run_all", "run_some"]

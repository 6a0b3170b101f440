"""Is a file valid CF? As the community's checker sees it, where that is installed."""

from __future__ import annotations

import importlib
import importlib.util
import warnings
from pathlib import Path

from texture.bed.readiness import Check

__all__ = ["CF_VERSION", "check_cf"]

CF_VERSION = "1.11"
NAME = "CF compliance"
UGRID_WORDS = ("cf_role", "requires exactly one variable with standard_name")
"""In what the checker says of valid UGRID files: it does not know their roles, nor that nodes have positions too."""


def check_cf(path: Path) -> Check:
    """Run the compliance checker on a file.

    Parameters
    ----------
    path : path
        NetCDF file.

    Returns
    -------
    Check
        `warn` with the first findings and their count: models seldom mind, other programs may. `skip` where the
        checker is not installed. On meshes what it says for want of knowing UGRID is left out.
    """
    if importlib.util.find_spec("compliance_checker") is None:
        return Check(
            NAME, "skip", "not looked at: the compliance checker is not installed (pip install compliance-checker)"
        )
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        suite = importlib.import_module("compliance_checker.runner").CheckSuite()
        suite.load_all_available_checkers()
        dataset = suite.load_dataset(str(path))
        results = suite.run_all(dataset, [f"cf:{CF_VERSION}"])
        mesh = any(getattr(v, "cf_role", "") == "mesh_topology" for v in dataset.variables.values())
        dataset.close()
    found: list[str] = []
    for groups, errors in results.values():
        found += [f"the checker itself failed in {name}" for name in errors]
        found += [message for group in groups if group.value[0] < group.value[1] for message in group.msgs]
    left_out = [m for m in found if mesh and any(word in m for word in UGRID_WORDS)]
    found = [m for m in found if m not in left_out]
    if found:
        more = f" (and {len(found) - 2} more)" if len(found) > 2 else ""
        return Check(NAME, "warn", f"CF-{CF_VERSION}: {'; '.join(found[:2])}{more}")
    aside = ", leaving out what it does not know of UGRID meshes" if left_out else ""
    return Check(NAME, "pass", f"CF-{CF_VERSION}, by the compliance checker{aside}")

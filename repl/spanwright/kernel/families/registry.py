"""The families by their symbol; each module is imported when its family is first asked for."""

from __future__ import annotations

from importlib import import_module

from spanwright.kernel.families.base import Family

_MODULES: dict[str, str] = {
    "E": "nonsymmetric_macdonald",
    "P": "macdonald",
    "J": "macdonald",
    "m": "monomial_symmetric",
    "e": "elementary",
    "h": "complete_homogeneous",
    "p": "power_sums",
    "s": "schur",
    "S": "schubert",
    "G": "grothendieck",
    "kappa": "keys",
    "atom": "atoms",
}

NAMES: tuple[str, ...] = tuple(_MODULES)
"""All family symbols, monomials `x` left out."""

_loaded: dict[str, Family] = {}


def family(name: str) -> Family:
    """The family with this symbol; raises KeyError for an unknown one."""
    found = _loaded.get(name)
    if found is None:
        module = import_module(f"spanwright.kernel.families.{_MODULES[name]}")
        found = _loaded[name] = module.FAMILIES[name]
    return found

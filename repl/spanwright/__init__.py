"""Spanwright, an algebra workbench for special bases of polynomial rings."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

if TYPE_CHECKING:
    from spanwright.session import Outcome, Session

__all__ = ["Outcome", "Session", "__version__"]


def __getattr__(name: str) -> Any:
    # the kernel is loaded when a session is first asked for, not by the command line's start
    if name in ("Session", "Outcome"):
        from spanwright import session

        return getattr(session, name)
    raise AttributeError(f"module 'spanwright' has no attribute {name!r}")

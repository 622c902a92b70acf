"""What a log's header says: who wrote it, and the settings in force as `fix` sentences."""

from __future__ import annotations

from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING

from spanwright import __version__

if TYPE_CHECKING:
    from spanwright.kernel.coefficients import Scalar
    from spanwright.settings import Settings

_LIBRARIES = ("python-flint", "lark")
"""What results and their text depend on."""


def writer() -> str:
    """Spanwright and its libraries with their versions."""
    found = [f"spanwright {__version__}"]
    for name in _LIBRARIES:
        try:
            found.append(f"{name} {version(name)}")
        except PackageNotFoundError:
            continue
    return ", ".join(found)


def settings_as_sentences(settings: Settings) -> tuple[str, ...]:
    """The settings as `fix` sentences that bring them back.

    >>> from spanwright.settings import Settings
    >>> settings_as_sentences(Settings(n=3))[0]
    'fix n = 3'
    """
    found = []
    for name in settings.__dataclass_fields__:
        value = getattr(settings, name)
        if name == "memory" and value is not None:
            shown = f"{value // 10**6} MB"
        elif value is None:
            if name == "n":
                continue  # never fixed so far, and nothing sets it free
            shown = "free"
        else:
            shown = str(value) if isinstance(value, str | int) else _scalar(value)
        found.append(f"fix {name} = {shown}")
    return tuple(found)


def _scalar(value: Scalar) -> str:
    # the kernel is loaded only when q or t is fixed: a front end writes headers too
    from spanwright.rendering.text import text

    return text(value)

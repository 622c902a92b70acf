"""The nearest known word to a misspelt one."""

from __future__ import annotations

from collections.abc import Iterable
from difflib import get_close_matches


def nearest(word: str, candidates: Iterable[str]) -> str | None:
    """The candidate most like the word, or nothing when none is like it; ties go by the alphabet.

    >>> nearest("degre", ["degree", "norm", "support"])
    'degree'
    """
    known = sorted(set(candidates))
    folded = {candidate.lower(): candidate for candidate in reversed(known)}
    if word.lower() in folded and folded[word.lower()] != word:
        return folded[word.lower()]
    found = get_close_matches(word, [item for item in known if item != word], n=1, cutoff=0.6)
    return found[0] if found else None

"""The problems this package raises; the command turns each into one sentence and an exit status."""

from __future__ import annotations

__all__ = ["BadInput", "NotCertified", "RibbonError", "TooLarge"]


class RibbonError(Exception):
    """Base of every problem that is raised on purpose."""

    exit_status = 2


class BadInput(RibbonError, ValueError):
    """Something given cannot be used: the sentence says what, where, and what would be right."""


class TooLarge(BadInput):
    """The job does not fit the memory or time allowed: the sentence says which way would fit."""


class NotCertified(RibbonError):
    """An answer could not be certified as complete; ``partial`` holds what is known."""

    exit_status = 3

    def __init__(self, sentence: str, partial: object = None) -> None:
        """Keep the sentence and what is known."""
        super().__init__(sentence)
        self.partial = partial

"""The one error of the project.

Everything a person can get wrong ends in a `SynthError`: the command line catches it in one place, prints
its text and exits with status 2.  Each message names the file, the key, the value, the bound and the remedy.
"""

from __future__ import annotations


class SynthError(ValueError):
    """Input that cannot be used, or a requirement that cannot be built."""


class SpecError(SynthError):
    """The spec, or a file it names, cannot be used."""


class CatalogError(SynthError):
    """A catalog cannot be used, or holds no part that the request needs."""


class FolderError(SynthError):
    """A design folder cannot be read, or may not be replaced."""


class CircuitError(SynthError):
    """A circuit has no solution, or an iteration over it did not converge."""


class InfeasibleError(SynthError):
    """No chain can be built for the spec: says which requirement binds and the nearest value that works."""


class QuantityError(SynthError):
    """A text is no quantity of the unit that is wanted.

    Args:
        shown: the value as it was given, quoted.
        reason: what is wrong with it, the unit that is wanted and an example of a right one.
    """

    def __init__(self, shown: str, reason: str) -> None:
        super().__init__(shown, reason)
        self.shown = shown
        self.reason = reason

    def __str__(self) -> str:
        return f"{self.shown}: {self.reason}"

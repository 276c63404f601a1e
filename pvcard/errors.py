"""What a user is told when an input cannot be used.

Every error names the file, the place in it, what was found, what was expected and what to do about
it, in the order in which somebody looks for them.
"""

from __future__ import annotations


class InputError(ValueError):
    """An input that cannot be used, said in words a user can act on.

    Parameters
    ----------
    problem : what is wrong, one sentence without a full stop
    file : the file it was found in
    place : line, column or key within the file
    found : what stands there
    expected : what should stand there
    advice : what to do, or the likely slip

    Examples
    --------
    >>> print(InputError("unknown unit", file="k3.toml", place="cylinder.bore", found="'250 mn'"))
    k3.toml: cylinder.bore: unknown unit; found '250 mn'
    """

    def __init__(
        self,
        problem: str,
        *,
        file: str | None = None,
        place: str | None = None,
        found: str | None = None,
        expected: str | None = None,
        advice: str | None = None,
    ) -> None:
        """Keep the parts and compose the message."""
        self.problem = problem
        self.file = file
        self.place = place
        self.found = found
        self.expected = expected
        self.advice = advice
        super().__init__(self.message())

    def message(self) -> str:
        """Return the whole message as one line."""
        where = "".join(f"{part}: " for part in (self.file, self.place) if part)
        text = where + self.problem
        if self.found:
            text += f"; found {self.found}"
        if self.expected:
            text += f"; expected {self.expected}"
        if self.advice:
            text += f". {self.advice}"
        return text


class MachineError(InputError):
    """A machine description that cannot be used."""


class ExportError(InputError):
    """An export that cannot be used."""


class GasError(InputError):
    """A gas that cannot be computed: unknown component, wrong sum, two-phase state."""

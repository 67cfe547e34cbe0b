"""The faults a run can end with: fields only; the words are put together by the reports."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, order=True)
class Fault:
    """One thing wrong in the user's input, with its place and the way out.

    ``name`` is a stable kebab-case word for the kind of fault; ``found`` is the input as written;
    ``expected`` says what is wanted there; ``remedy`` what to do. Lines and columns count from 1;
    0 where the fault has no place inside the file.
    """

    file: str
    line: int
    column: int
    name: str
    found: str
    expected: str
    remedy: str = ""


class SelectorError(Exception):
    """A run that ends without an answer; ``exit_code`` is what the command line returns."""

    exit_code = 70
    name = "internal"


class InputFaults(SelectorError):
    """The input cannot be used; carries every fault found, in order of file and place."""

    exit_code = 2
    name = "input"

    def __init__(self, faults: list[Fault]) -> None:
        self.faults = tuple(sorted(set(faults)))
        first = self.faults[0]
        super().__init__(
            f"{first.file}:{first.line}: {first.name}: {first.found}; expected {first.expected}"
            + (f" (and {len(self.faults) - 1} more)" if len(self.faults) > 1 else "")
        )


class WrongVerdict(SelectorError):
    """Two routes that must agree do not; the answer is withheld."""

    name = "routes-disagree"

"""One root error; below it by who must act; and the near-miss message.

Every error carries what is wrong, the rule it breaks, the offending value, the place and the remedy. Only the
root class becomes a one-line message and an exit code; anything else is a bug and shows its traceback.
"""

import difflib
from collections.abc import Iterable


class TailmarkError(Exception):
    """Root of all errors a user can act on.

    Arguments: ``what`` is wrong (one clause); ``rule`` it breaks; ``value`` found; ``place`` (file, row, column);
    ``remedy`` (one clause). The text of the error is one line.
    """

    def __init__(self, what: str, *, rule: str = "", value: object = None, place: str = "", remedy: str = "") -> None:
        self.what, self.rule, self.value, self.place, self.remedy = what, rule, value, place, remedy
        super().__init__(self._line())

    def _line(self) -> str:
        head = f"{self.place}: {self.what}" if self.place else self.what
        if self.value is not None:
            head += f", found {_shown(self.value)}"
        if self.rule:
            head += f" [rule: {self.rule}]"
        return " ".join((f"{head}. {self.remedy}" if self.remedy else head).split())


class StudyError(TailmarkError):
    """The study file asks for something that does not exist or does not fit together."""


class DataError(TailmarkError):
    """An input table cannot be used as it stands."""


class FitError(TailmarkError):
    """A model cannot be estimated from what was handed over (never raised for a single day: that is a status)."""


class RecordError(TailmarkError):
    """A run folder cannot be written or read."""


def _shown(value: object) -> str:
    text = repr(value) if isinstance(value, str) else str(value)
    text = "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)
    return text if len(text) <= 80 else text[:77] + "..."


def near_miss(word: object, known: Iterable[str]) -> str:
    """Say which known names there are, the nearest first, whatever its case: the remedy for an unknown name."""
    names = sorted(known)
    small = {name.casefold(): name for name in names}
    close = difflib.get_close_matches(str(word).casefold(), small, n=1, cutoff=0.6)
    if close:
        return f"Did you mean {small[close[0]]!r}?"
    return "Known: " + ", ".join(names) + "."

"""The terms that were fixed before judging: their hash, and what changed since the previous review."""

from backtest.reporting import wording as say
from backtest.reporting.book import Book, text
from backtest.reporting.tables import Fact

SHOWN = 12
"""Characters of a hash that are shown."""


def terms_fact(book: Book) -> tuple[Fact, ...]:
    """Return the hash of the terms with which of them changed, for the first page; nothing where none was kept."""
    terms = book.mapping("terms")
    if not terms:
        return ()
    changed = _changed(book)
    if changed is None:
        words = "no previous review named"
    else:
        keys = say.listed([line.partition(":")[0].replace("_", " ") for line in changed]) or "nothing"
        words = f"changed since the previous review: {keys}"
    return (Fact("Terms fixed before judging (battery, criteria, cut-off)", f"{_hash(book)}; {words}"),)


def terms_lines(book: Book) -> tuple[Fact, ...]:
    """Return the terms line by line: hash, previous review, every change with what stood before."""
    terms = book.mapping("terms")
    if not terms:
        return ()
    lines = [Fact("Hash of battery, criteria, spans and cut-off (SHA-256)", text(terms.get("sha256")) or say.DASH)]
    changed = _changed(book)
    if changed is None:
        return (*lines, Fact("Previous review", "none named"))
    lines.append(Fact("Previous review", f"run {text(terms.get('previous_run')) or say.DASH}"))
    found = "; ".join(line.replace("_", " ") for line in changed)
    return (*lines, Fact("Changed since the previous review", found or "nothing but the cut-off"))


def _hash(book: Book) -> str:
    return text(book.mapping("terms").get("sha256"))[:SHOWN] or say.DASH


def _changed(book: Book) -> list[str] | None:
    """Return the lines of what changed; None where no previous review was named."""
    changed = book.mapping("terms").get("changed")
    return [str(line) for line in changed] if isinstance(changed, list) else None

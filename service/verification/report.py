"""What a verification found."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, kw_only=True, slots=True)
class Fault:
    """The first place that does not hold: an entry of the history, or a row of a table."""

    entry: int | None
    """Number of the entry, or of the one that vouches for the row; None where neither can be said."""
    table: str | None
    row: str | None
    what: str
    """A sentence."""

    def sentence(self) -> str:
        """The place and what is wrong there, in one line."""
        place = [f"entry {self.entry}"] if self.entry is not None else []
        if self.table is not None:
            place.append(f"table {self.table}" + (f", row {self.row}" if self.row is not None else ""))
        return printable(f"{'; '.join(place) or 'the store'}: {self.what}")


def printable(text: str) -> str:
    """Return a text of the store with whatever does not show, or moves a terminal's cursor, as an escape.

    Whoever tampered with a store could otherwise write over what is said of it.
    """
    return "".join(
        character if character.isprintable() else character.encode("unicode_escape").decode()
        for character in text
    )


class Broken(Exception):
    """Something does not hold, and where."""

    def __init__(
        self, what: str, *, entry: int | None = None, table: str | None = None, row: str | None = None
    ) -> None:
        super().__init__(what)
        self.fault = Fault(entry=entry, table=table, row=row, what=what)


@dataclass(frozen=True, kw_only=True, slots=True)
class Report:
    """What was verified and what was found. `fault` None: everything that is covered holds."""

    fault: Fault | None
    entries: int
    """Entries that were verified before the end, or before the fault."""
    rows: int
    """Rows of other tables held against the entries that vouch for them."""
    head: str | None
    """Digest of the last entry that was verified."""
    root: str
    """Merkle root (RFC 9162) over the entries that were verified."""
    checkpoint_size: int | None
    """How many entries the checkpoint covers that this was held against; None: none was given."""
    covered: tuple[str, ...]
    not_covered: tuple[str, ...]
    """Tables whose content nothing vouches for."""
    notes: tuple[str, ...]
    """What is no fault and worth knowing."""
    signatures: tuple[str, ...]
    """Sentences: which signatures were checked, by which keys, and which entries none of them covers.

    Empty where a fault ended the reading.
    """

    @property
    def holds(self) -> bool:
        """True where no fault was found."""
        return self.fault is None

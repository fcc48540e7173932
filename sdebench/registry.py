"""The registry: things by unique name, with the nearest name for one that is not there."""

from collections.abc import Iterator, Mapping
from typing import Generic, Protocol, TypeVar

from sdebench.errors import DuplicateName, UnknownName


class Named(Protocol):
    """Anything with a name."""

    @property
    def name(self) -> str:
        """The unique name."""


Entry = TypeVar("Entry", bound=Named)


class Registry(Mapping[str, Entry], Generic[Entry]):
    """A growing mapping from names to things of one `kind`, each with the place it came from.

    `listing` is the command that lists them; `faults` tells what was offered and could not be had.
    """

    def __init__(self, kind: str, listing: str) -> None:
        self.kind = kind
        self.listing = listing
        self.faults: list[str] = []
        self._entries: dict[str, Entry] = {}
        self._places: dict[str, str] = {}

    def add(self, entry: Entry, place: str) -> None:
        """Add `entry`, found at `place`; raises `DuplicateName` if its name is taken."""
        taken = self._entries.get(entry.name)
        if taken is not None and taken is not entry:
            raise DuplicateName(self.kind, entry.name, [self._places[entry.name], place])
        self._entries[entry.name] = entry
        self._places[entry.name] = place

    def __getitem__(self, name: str) -> Entry:
        try:
            return self._entries[name]
        except KeyError:
            hint = f" `{self.listing}` lists all {len(self._entries)}."
            raise UnknownName(self.kind, name, self._entries, hint) from None

    def get(self, name: str, default: object = None) -> Entry | None:  # type: ignore[override]
        """Return the entry of a name, or None."""
        return self._entries.get(name)

    def __contains__(self, name: object) -> bool:
        return name in self._entries

    def __iter__(self) -> Iterator[str]:
        return iter(sorted(self._entries))

    def __len__(self) -> int:
        return len(self._entries)

"""Collecting what is wrong with the answers, so that all of it is said at once."""

from __future__ import annotations

from dataclasses import dataclass, field

from bayeslca.exceptions import ResponsesError


@dataclass
class Problems:
    """Problems found so far in one source.

    Attributes
    ----------
    source : str
        What the messages name first.
    messages : list of str
    """

    source: str
    messages: list[str] = field(default_factory=list)

    def add(self, message: str) -> None:
        """Note a problem."""
        self.messages.append(message)

    def stop_if_any(self) -> None:
        """Raise one error with all problems, if there are any."""
        if not self.messages:
            return
        if len(self.messages) == 1:
            raise ResponsesError(f"{self.source}: {self.messages[0]}")  # noqa: EM102
        listed = "".join(f"\n  {i}. {text}" for i, text in enumerate(self.messages, start=1))
        msg = f"{self.source}: {len(self.messages)} problems:{listed}"
        raise ResponsesError(msg)


def listed_with_counts(counts: dict[str, int], most: int = 12) -> str:
    """Return ``'Yes' (40), 'yes' (7) and 3 more`` for values with their counts."""
    shown = ", ".join(f"{value!r} ({n:,})" for value, n in list(counts.items())[:most])
    more = f" and {len(counts) - most} more" if len(counts) > most else ""
    return shown + more

"""What an audit came to, item by item."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Item:
    """One thing looked at: `result` is "accepted", "rejected" or "not re-checked"."""

    name: str
    result: str
    detail: str


@dataclass(frozen=True)
class AuditReport:
    """What the audit came to."""

    items: tuple[Item, ...]

    @property
    def rejected(self) -> bool:
        """Whether anything was found wrong."""
        return any(item.result == "rejected" for item in self.items)

    @property
    def accepted(self) -> bool:
        """Whether everything the verdict asserts was re-checked and found right."""
        return all(item.result == "accepted" for item in self.items)

    @property
    def exit_code(self) -> int:
        """0 all accepted, 1 something rejected, 3 something not re-checked."""
        return 1 if self.rejected else 0 if self.accepted else 3

    def __str__(self) -> str:
        return "\n".join(f"{item.name:<18} {item.result:<15} {item.detail}".rstrip() for item in self.items)

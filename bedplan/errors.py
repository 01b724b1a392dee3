"""What can go wrong, as sentences a manager understands.

BedplanError                       a page may show it as it stands
├─ ImpossibleFigure (ValueError)   a figure outside its meaning
├─ UnreadableRecords               .problems: every problem, in file order, all at once
└─ TargetOutOfReach                no bed count on the curve meets the rule
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable


class BedplanError(Exception):
    """Anything the program can explain to the person using it; the text is one or more whole sentences."""


class ImpossibleFigure(BedplanError, ValueError):  # noqa: N818  named after what happened
    """A figure lies outside its meaning; the message quotes the value and says what is allowed."""


class UnreadableRecords(BedplanError):  # noqa: N818
    """A records file can't be used; ``problems`` lists every reason, in file order, all at once."""

    def __init__(self, problems: Iterable[str]) -> None:
        self.problems: tuple[str, ...] = tuple(problems)
        super().__init__(" ".join(self.problems))


class TargetOutOfReach(BedplanError):  # noqa: N818
    """No bed count on the curve meets the rule; the message says how near the largest count came."""

"""A recipe: what shares of which stocks make one liquid, or why none can."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

Condition = Mapping[str, Any]


@dataclass(frozen=True, kw_only=True)
class Recipe:
    """Shares of the volume by stock, water among them; they are above 0 and add up to 1.

    remarks: what the bench has to know, such as "meant for pH 5.4 at 22 °C; ionic strength 0.07".
    """

    parts: Mapping[str, float]
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True)
class Refusal:
    """Why no mix of the stocks makes a condition.

    reason: the end of a sentence that begins with the condition, such as "needs 620 mM of salt, and
    the strongest stock holds 500 mM". cause: what it shares with other conditions, as the end of
    "these cannot be made:". salt_stock_mm: the weakest salt stock that would do, where that is it.
    """

    reason: str
    cause: str = ""
    salt_stock_mm: float | None = None

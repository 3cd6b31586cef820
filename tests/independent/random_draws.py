"""What every strategy draws with."""

from __future__ import annotations

from typing import Any

from hypothesis import strategies as st

Draw = Any


def one_of(draw: Draw, *values: Any) -> Any:
    """One of some values."""
    return draw(st.sampled_from(values))


def chance(draw: Draw, once_in: int) -> bool:
    """True once in so many draws; shrinks to False. Ends of a range come up too often, so it is not the last."""
    return bool(draw(st.integers(0, once_in - 1)) == max(1, once_in // 2))

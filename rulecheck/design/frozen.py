"""A mapping that keeps what it was made with."""

from __future__ import annotations

from typing import Any, NoReturn, TypeVar

K = TypeVar("K")
V = TypeVar("V")


class FrozenDict(dict[K, V]):
    """A dictionary that cannot be changed; unlike a proxy it can be pickled and sent to a worker."""

    def _refuse(self, *_args: Any, **_named: Any) -> NoReturn:  # noqa: ANN401
        raise TypeError("a loaded design cannot be changed")

    __setitem__ = __delitem__ = __ior__ = _refuse
    update = pop = popitem = clear = setdefault = _refuse

    def __reduce__(self) -> tuple[Any, ...]:
        return type(self), (dict(self),)

"""Numbers that carry their rates of change, so that one formula gives a value and its derivatives.

Forward differentiation: each operation hands on the exact rates by the rules of the differential
calculus. The formulas of the other modules take a `Dual` wherever they take an array, as long
as they are written in the operations listed here; all others are refused, never guessed.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from typing import Any

import numpy as np
from numpy.lib.mixins import NDArrayOperatorsMixin
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

# How an output changes per change of each input, from inputs and output.
_SLOPES: Mapping[Any, Callable[..., tuple[Any, ...]]] = {
    np.add: lambda a, b, out: (1.0, 1.0),
    np.subtract: lambda a, b, out: (1.0, -1.0),
    np.multiply: lambda a, b, out: (b, a),
    np.true_divide: lambda a, b, out: (1.0 / b, -out / b),
    np.negative: lambda a, out: (-1.0,),
    np.positive: lambda a, out: (1.0,),
    np.sqrt: lambda a, out: (0.5 / out,),
    np.exp: lambda a, out: (out,),
    np.square: lambda a, out: (2.0 * a,),
    np.hypot: lambda a, b, out: tuple(part / np.where(out > 0.0, out, np.inf) for part in (a, b)),
}
# Questions, whose answers do not change with small steps.
_QUESTIONS = frozenset(
    {
        np.greater, np.greater_equal, np.less, np.less_equal, np.equal, np.not_equal,
        np.isfinite, np.isnan,
    }
)  # fmt: skip


class Dual(NDArrayOperatorsMixin):
    """An array or a number with its rates of change along p directions; immutable by custom.

    Attributes
    ----------
    value : float (...)
    rates : float (p, ...)
    """

    __slots__ = ("rates", "value")

    def __init__(self, value: ArrayLike, rates: ArrayLike) -> None:
        self.value: Floats = np.asarray(value, dtype=np.float64)
        self.rates: Floats = np.asarray(rates, dtype=np.float64)
        if self.rates.shape[1:] != self.value.shape:
            raise ValueError(f"rates {self.rates.shape} of values {self.value.shape}")

    def __repr__(self) -> str:
        return f"Dual({self.value!r}, {self.rates!r})"

    @property
    def shape(self) -> tuple[int, ...]:
        """Shape of the values."""
        return self.value.shape

    @property
    def ndim(self) -> int:
        """Number of axes of the values."""
        return self.value.ndim

    @property
    def size(self) -> int:
        """Number of the values."""
        return self.value.size

    def __getitem__(self, key: Any) -> Dual:
        keys = key if isinstance(key, tuple) else (key,)
        return Dual(self.value[key], self.rates[(slice(None), *keys)])

    def sum(self, axis: int | None = None, *, keepdims: bool = False) -> Dual:
        """Sum over one axis, or all."""
        axes = tuple(range(self.ndim)) if axis is None else (axis % self.ndim,)
        return Dual(
            self.value.sum(axis=axes, keepdims=keepdims),
            self.rates.sum(axis=tuple(one + 1 for one in axes), keepdims=keepdims),
        )

    def __array__(self, *_args: Any, **_options: Any) -> Floats:
        """Refuse to become a plain array, which would lose the rates unseen."""
        raise TypeError("an array with rates of change cannot become one without")

    def __array_ufunc__(self, ufunc: Any, method: str, *inputs: Any, **options: Any) -> Any:
        """Apply an elementwise operation or a matrix product."""
        # In place, such as a += b, makes a new number: these do not change.
        if method != "__call__" or not isinstance(options.pop("out", (self,))[0], Dual) or options:
            return NotImplemented
        values = [value_of(one) for one in inputs]
        if ufunc in _QUESTIONS:
            return ufunc(*values)
        if ufunc is np.matmul:
            return _matmul(*inputs)
        if ufunc not in _SLOPES:
            return NotImplemented
        value = np.asarray(ufunc(*values))
        slopes = _SLOPES[ufunc](*values, value)
        rates = sum(
            np.asarray(slope) * _aligned(one, value.ndim)
            for one, slope in zip(inputs, slopes, strict=True)
            if isinstance(one, Dual)
        )
        return Dual(value, np.broadcast_to(rates, (len(np.asarray(rates)), *value.shape)))

    def __array_function__(
        self, func: Any, types: Iterable[type], args: tuple[Any, ...], kwargs: dict[str, Any]
    ) -> Any:
        """Apply one of a few functions of NumPy."""
        if func not in _FUNCTIONS:
            return NotImplemented
        return _FUNCTIONS[func](*args, **kwargs)


def value_of(number: Any) -> Any:
    """Value of a `Dual`, and of everything else itself."""
    return number.value if isinstance(number, Dual) else number


def rates_of(number: Any, directions: int) -> Floats:
    """Rates (directions, ...) of a `Dual`; 0 for everything else."""
    if isinstance(number, Dual):
        return number.rates
    return np.zeros((directions, *np.shape(number)))


def plain(number: Any) -> Any:
    """Python float of a NumPy scalar; arrays and numbers with their rates stay what they are."""
    return number if isinstance(number, Dual) or np.ndim(number) > 0 else float(number)


def _aligned(number: Dual, ndim: int) -> Floats:
    """Rates with axes of length 1 behind the first, as broadcasting adds them to values."""
    missing = ndim - number.ndim
    return number.rates.reshape(len(number.rates), *(1,) * missing, *number.shape)


def _matmul(left: Any, right: Any) -> Dual:
    a, b = np.asarray(value_of(left)), np.asarray(value_of(right))
    value = np.asarray(a @ b)
    rates: Any = 0.0
    if isinstance(left, Dual):
        rates = rates + (left.rates @ b if a.ndim > 1 or b.ndim < 3 else _unsupported(a, b))
    if isinstance(right, Dual):
        if b.ndim == 1:
            rates = rates + np.einsum("...k,pk->p...", a, right.rates)
        else:
            rates = rates + a @ _aligned(right, max(a.ndim, b.ndim))
    return Dual(value, rates)


def _unsupported(a: Floats, b: Floats) -> Floats:
    raise TypeError(f"no rates for the product of shapes {a.shape} and {b.shape}")


def _einsum(subscripts: str, *operands: Any) -> Dual:
    """Sum of products; the letter P is kept for the directions."""
    terms, result = subscripts.split("->")
    letters = terms.split(",")
    values = [value_of(one) for one in operands]
    rates: Any = 0.0
    for place, one in enumerate(operands):
        if isinstance(one, Dual):
            inner = ",".join([*letters[:place], f"P{letters[place]}", *letters[place + 1 :]])
            parts = [*values[:place], one.rates, *values[place + 1 :]]
            rates = rates + np.einsum(f"{inner}->P{result}", *parts)
    return Dual(np.einsum(subscripts, *values), rates)


def _together(join: Callable[..., Any]) -> Callable[..., Dual]:
    """`stack` or `concatenate` along an axis."""

    def joined(parts: Iterable[Any], axis: int = 0) -> Dual:
        parts = list(parts)
        directions = next(len(one.rates) for one in parts if isinstance(one, Dual))
        rates = [rates_of(one, directions) for one in parts]
        behind = axis + 1 if axis >= 0 else axis
        return Dual(join([value_of(one) for one in parts], axis=axis), join(rates, axis=behind))

    return joined


def _where(condition: Any, yes: Any, no: Any) -> Dual:
    """Take the rates of what the value is taken from."""
    value = np.where(condition, value_of(yes), value_of(no))
    directions = next(len(one.rates) for one in (yes, no) if isinstance(one, Dual))
    chosen = [
        _aligned(one, value.ndim) if isinstance(one, Dual) else np.zeros((directions, *value.shape))
        for one in (yes, no)
    ]
    return Dual(value, np.where(condition, *chosen))


_FUNCTIONS: Mapping[Any, Callable[..., Any]] = {
    np.einsum: _einsum,
    np.stack: _together(np.stack),
    np.concatenate: _together(np.concatenate),
    np.sum: lambda a, axis=None, keepdims=False: a.sum(axis, keepdims=keepdims),
    np.where: _where,
    np.zeros_like: lambda a: np.zeros_like(a.value),
    np.ones_like: lambda a: np.ones_like(a.value),
    np.shape: lambda a: a.shape,
    np.ndim: lambda a: a.ndim,
}


__all__ = ["Dual", "plain", "rates_of", "value_of"]

"""The arithmetics that functions of s are evaluated in: arrays, many digits, and values with their slope."""

from __future__ import annotations

from typing import Any

import mpmath
import numpy as np

from nodal.solver.matrix import Arithmetic


class NumpyArithmetic:
    """Complex arrays in double precision."""

    def sqrt(self, x: Any) -> Any:
        return np.sqrt(x)

    def exp(self, x: Any) -> Any:
        return np.exp(x)

    def expm1(self, x: Any) -> Any:
        return np.expm1(x)

    def log(self, x: Any) -> Any:
        return np.log(x)

    def power(self, x: Any, exponent: float) -> Any:
        return np.power(x, exponent)

    def select(self, condition: Any, then: Any, otherwise: Any) -> Any:
        return np.where(condition, then, otherwise)

    def real(self, x: Any) -> Any:
        return np.real(x)


class MpArithmetic:
    """Single numbers with `digits` decimal digits; mpmath's global precision is left alone."""

    def __init__(self, digits: int) -> None:
        self.context: Any = mpmath.mp.clone()
        self.context.dps = digits

    @property
    def digits(self) -> int:
        return int(self.context.dps)

    def number(self, x: Any) -> Any:
        """A Python, numpy or mpmath number as one of this precision; real stays real."""
        if isinstance(x, np.generic):
            x = x.item()
        if isinstance(x, complex):
            return self.context.mpc(x.real, x.imag)
        if hasattr(x, "_mpc_"):
            return self.context.make_mpc(x._mpc_)
        if hasattr(x, "_mpf_"):
            return self.context.make_mpf(x._mpf_)
        return self.context.mpf(x)

    def sqrt(self, x: Any) -> Any:
        return self.context.sqrt(x)

    def exp(self, x: Any) -> Any:
        return self.context.exp(x)

    def expm1(self, x: Any) -> Any:
        return self.context.expm1(x)

    def log(self, x: Any) -> Any:
        return self.context.log(x)

    def power(self, x: Any, exponent: float) -> Any:
        return self.context.power(x, self.context.mpf(exponent))

    def select(self, condition: Any, then: Any, otherwise: Any) -> Any:
        return then if condition else otherwise

    def real(self, x: Any) -> Any:
        return x.real


class Jet:
    """A value with its derivative by s (first-order forward differentiation)."""

    __slots__ = ("slope", "value")
    __array_ufunc__ = None  # array * Jet is Jet.__rmul__, not an array of jets

    def __init__(self, value: Any, slope: Any) -> None:
        self.value = value
        self.slope = slope

    def __neg__(self) -> Jet:
        return Jet(-self.value, -self.slope)

    def __add__(self, other: Any) -> Jet:
        if isinstance(other, Jet):
            return Jet(self.value + other.value, self.slope + other.slope)
        return Jet(self.value + other, self.slope)

    __radd__ = __add__

    def __sub__(self, other: Any) -> Jet:
        return self.__add__(-other)

    def __rsub__(self, other: Any) -> Jet:
        return self.__neg__().__add__(other)

    def __mul__(self, other: Any) -> Jet:
        if isinstance(other, Jet):
            return Jet(self.value * other.value, self.slope * other.value + self.value * other.slope)
        return Jet(self.value * other, self.slope * other)

    __rmul__ = __mul__

    def __truediv__(self, other: Any) -> Jet:
        if isinstance(other, Jet):
            quotient = self.value / other.value
            return Jet(quotient, (self.slope - quotient * other.slope) / other.value)
        return Jet(self.value / other, self.slope / other)

    def __rtruediv__(self, other: Any) -> Jet:
        quotient = other / self.value
        return Jet(quotient, -quotient * self.slope / self.value)


class JetArithmetic:
    """Values with slopes, on top of another arithmetic; plain numbers count as constants."""

    def __init__(self, base: Arithmetic) -> None:
        self.base = base

    def sqrt(self, x: Any) -> Any:
        if not isinstance(x, Jet):
            return self.base.sqrt(x)
        root = self.base.sqrt(x.value)
        return Jet(root, x.slope / (2 * root))

    def exp(self, x: Any) -> Any:
        if not isinstance(x, Jet):
            return self.base.exp(x)
        power = self.base.exp(x.value)
        return Jet(power, power * x.slope)

    def expm1(self, x: Any) -> Any:
        if not isinstance(x, Jet):
            return self.base.expm1(x)
        return Jet(self.base.expm1(x.value), self.base.exp(x.value) * x.slope)

    def log(self, x: Any) -> Any:
        if not isinstance(x, Jet):
            return self.base.log(x)
        return Jet(self.base.log(x.value), x.slope / x.value)

    def power(self, x: Any, exponent: float) -> Any:
        if not isinstance(x, Jet):
            return self.base.power(x, exponent)
        result = self.base.power(x.value, exponent)
        return Jet(result, exponent * result / x.value * x.slope)

    def select(self, condition: Any, then: Any, otherwise: Any) -> Any:
        if not isinstance(then, Jet) and not isinstance(otherwise, Jet):
            return self.base.select(condition, then, otherwise)
        a = then if isinstance(then, Jet) else Jet(then, 0.0)
        b = otherwise if isinstance(otherwise, Jet) else Jet(otherwise, 0.0)
        select = self.base.select
        return Jet(select(condition, a.value, b.value), select(condition, a.slope, b.slope))

    def real(self, x: Any) -> Any:
        return self.base.real(x.value if isinstance(x, Jet) else x)

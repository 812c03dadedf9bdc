"""C's integer arithmetic on Python's integers."""

from __future__ import annotations

from collections.abc import Callable

from .kinds import Number, Undefined


def quotient(a: int, b: int) -> int:
    """C's division, which cuts towards zero."""
    if b == 0:
        raise Undefined("division by zero")
    return a // b if (a < 0) == (b < 0) else -(abs(a) // abs(b))


def remainder(a: int, b: int) -> int:
    """What C's division leaves, with the sign of the dividend."""
    return a - quotient(a, b) * b


def shifted_left(a: int, b: int, bits: int) -> int:
    """``a << b`` in a type of so many bits."""
    if a < 0 or not 0 <= b < bits:
        raise Undefined("a shift by more bits than there are, or of a negative number")
    return a << b


def shifted_right(a: int, b: int, bits: int) -> int:
    """``a >> b`` in a type of so many bits."""
    if not 0 <= b < bits:
        raise Undefined("a shift by more bits than there are")
    return a >> b


def wrapped(value: int, kind: Number) -> int:
    """The value modulo 2^bits, in the type's range."""
    if kind.name == "_Bool":
        return int(value != 0)
    value &= (1 << 8 * kind.size) - 1
    return value - (1 << 8 * kind.size) if value > kind.high else value


def overflow(value: int) -> None:
    """Signed arithmetic left its type."""
    raise Undefined(f"{value} overflows its type")


def outside(name: str, at: int) -> None:
    """A subscript is outside the declared extent."""
    raise Undefined(f"subscript {at} of {name} is outside its extent")


_PLAIN: dict[str, Callable[[int, int], int]] = {
    "+": lambda a, b: a + b, "-": lambda a, b: a - b, "*": lambda a, b: a * b, "&": lambda a, b: a & b,
    "|": lambda a, b: a | b, "^": lambda a, b: a ^ b, "/": quotient, "%": remainder,
}
COMPARE: dict[str, Callable[[float, float], bool]] = {
    "<": lambda a, b: a < b, "<=": lambda a, b: a <= b, ">": lambda a, b: a > b, ">=": lambda a, b: a >= b,
    "==": lambda a, b: a == b, "!=": lambda a, b: a != b,
}


def integer_work(operator: str, kind: Number) -> Callable[..., int]:
    """An operation on data in an integer type; it wraps around, since data of our invention may be large."""
    bits = 8 * kind.size
    if operator == "<<":
        return lambda a, b: wrapped(shifted_left(a, b, bits), kind)
    if operator == ">>":
        return lambda a, b: wrapped(shifted_right(a, b, bits), kind)
    plain = _PLAIN[operator]
    return lambda a, b: wrapped(plain(a, b), kind)


def exact(operator: str, a: int, b: int, kind: Number) -> int:
    """Constant arithmetic; Undefined where it leaves a signed type."""
    if operator in ("<<", ">>"):
        shift = shifted_left if operator == "<<" else shifted_right
        result = shift(a, b, 8 * kind.size)
    else:
        result = _PLAIN[operator](a, b)
    if not kind.low <= result <= kind.high:
        if kind.signed:
            overflow(result)
        return wrapped(result, kind)
    return result

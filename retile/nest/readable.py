"""Forms and formulas as C text: what assumptions say, and what bounds are called."""

from __future__ import annotations

from collections.abc import Mapping

from ..affine import Affine, AllOf, Bound, Constraint, Extremum, Formula, Symbol


def form_text(form: Affine, texts: Mapping[str, str] | None = None) -> str:
    """An affine form as C; symbols are replaced by their C text.  A floor is a plain division, right from zero up."""
    parts: list[str] = []
    for symbol, coefficient in sorted(form.terms, key=lambda term: term[1] < 0):
        body = _symbol_text(symbol, texts or {})
        if abs(coefficient) != 1:
            body = f"{abs(coefficient)} * {body if isinstance(symbol, str) else f'({body})'}"
        parts.append(("- " if coefficient < 0 else "+ ") + body)
    if form.constant or not parts:
        parts.append(("- " if form.constant < 0 else "+ ") + str(abs(form.constant)))
    text = " ".join(parts)
    return text[2:] if text.startswith("+ ") else "-" + text[2:]


def _symbol_text(symbol: Symbol, texts: Mapping[str, str]) -> str:
    if isinstance(symbol, str):
        text = texts.get(symbol, symbol)
        return text if _is_primary(text) else f"({text})"
    numerator = form_text(symbol.numerator, texts)
    return f"{numerator if _is_primary(numerator) else f'({numerator})'} / {symbol.divisor}"


def _is_primary(text: str) -> bool:
    return all(c.isalnum() or c in "_.->[]" for c in text) or (text.startswith("(") and _closes_at_end(text))


def _closes_at_end(text: str) -> bool:
    depth = 0
    for at, c in enumerate(text):
        depth += (c in "([") - (c in ")]")
        if depth == 0:
            return at == len(text) - 1
    return False


def bound_text(bound: Bound, texts: Mapping[str, str] | None = None) -> str:
    """A bound as C; extrema become conditional expressions."""
    if isinstance(bound, Affine):
        return form_text(bound, texts)
    first, *rest = bound.bounds
    text = bound_text(first, texts)
    for other in rest:
        right = bound_text(other, texts)
        text = f"({text} {'<' if bound.kind == 'min' else '>'} {right} ? {text} : {right})"
    return text


def constraint_text(constraint: Constraint, texts: Mapping[str, str] | None = None) -> str:
    """``n - m >= 0`` as ``m <= n``: negative terms change sides."""
    form = constraint.form
    large = Affine.build({s: c for s, c in form.terms if c > 0})
    small = Affine.build({s: -c for s, c in form.terms if c < 0})
    if constraint.equality:
        return f"{form_text(large, texts)} == {form_text(small - form.constant, texts)}"
    if not small.terms:  # n - 1 >= 0
        return f"{form_text(large, texts)} >= {-form.constant}"
    if not large.terms:  # 3 - n >= 0
        return f"{form_text(small, texts)} <= {form.constant}"
    if form.constant == -1:
        return f"{form_text(small, texts)} < {form_text(large, texts)}"
    if form.constant < 0:
        return f"{form_text(small - form.constant, texts)} <= {form_text(large, texts)}"
    return f"{form_text(small, texts)} <= {form_text(large + form.constant, texts)}"


def formula_text(formula: Formula, texts: Mapping[str, str] | None = None) -> str:
    """A formula as C, e.g. ``n <= ld && m >= 1``."""
    if isinstance(formula, Constraint):
        return constraint_text(formula, texts)
    if not formula.parts:
        return "always" if isinstance(formula, AllOf) else "never"
    word = " && " if isinstance(formula, AllOf) else " || "
    parts = []
    for part in formula.parts:
        text = formula_text(part, texts)
        inner = not isinstance(part, Constraint) and len(part.parts) > 1 and len(formula.parts) > 1
        parts.append(f"({text})" if inner and type(part) is not type(formula) else text)
    return word.join(parts)


__all__ = ["Extremum", "bound_text", "constraint_text", "form_text", "formula_text"]

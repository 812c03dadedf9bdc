"""Which calls only compute a value: functions of the standard library, and functions of the file that are seen to.

A pure function's result depends on its arguments alone and it changes nothing, so its calls may run in any order. The
functions of <math.h> may set errno (ISO/IEC 9899:2018, 7.12.1 p5); that is allowed here, as every caller that tests
errno after a nest would be wrong about which iteration set it.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from pycparser import c_ast

from ..model import CType
from .scopes import Binding, FunctionNames, assigned_target

if TYPE_CHECKING:
    from .setting import Setting
    from .unit import Unit

_REAL = frozenset(
    "acos asin atan atan2 cos sin tan acosh asinh atanh cosh sinh tanh exp exp2 exp10 expm1 log log10 log1p log2 logb "
    "ilogb ldexp scalbn scalbln cbrt fabs hypot pow sqrt erf erfc tgamma ceil floor nearbyint rint lrint llrint round "
    "lround llround trunc fmod remainder copysign nextafter fdim fmax fmin fma roundeven".split()
)
_CLASSES = frozenset(
    "isnan isinf isfinite isnormal signbit fpclassify isgreater isgreaterequal isless islessequal islessgreater "
    "isunordered isinf_sign".split()
)
_COMPLEX = frozenset("cabs carg creal cimag conj cproj cexp clog csqrt cpow csin ccos ctan".split())
_WHOLE = frozenset(
    "abs labs llabs imaxabs popcount popcountl popcountll clz clzl clzll ctz ctzl ctzll ffs ffsl ffsll parity bswap16 "
    "bswap32 bswap64 isalpha isdigit isalnum isspace isupper islower ispunct isxdigit toupper tolower "
    "__isnan __isnanf __isnanl __isinf __isinff __isinfl __finite __finitef __finitel __signbit __signbitf __signbitl "
    "__fpclassify __fpclassifyf __fpclassifyl inff inf huge_val huge_valf".split()
)
# lgamma writes signgam, nan reads a string: neither is here.
PURE = _REAL | {name + end for name in _REAL | _COMPLEX for end in ("f", "l")} | _COMPLEX | _CLASSES | _WHOLE
# They return what they are given and only tell the compiler something.
_TRANSPARENT = frozenset({"__builtin_expect", "__builtin_expect_with_probability"})


def called_name(node: Any) -> str | None:
    """The name of the function that a call names; None for a call through a pointer."""
    return node.name.name if isinstance(node.name, c_ast.ID) else None


def is_pure_call(node: Any, setting: Setting) -> bool:
    """True if the call only computes a value from the values of its arguments."""
    binding = setting.names.of(node.name) if isinstance(node.name, c_ast.ID) else None
    return is_pure_function(called_name(node), binding, setting.unit)


def is_pure_function(name: str | None, binding: Binding | None, unit: Unit) -> bool:
    """True if a function is known to be pure, by its name or by its body."""
    if name is None or (binding is not None and binding.kind != "function"):
        return False
    definition = unit.function_named(name)
    if definition is not None:
        return unit.is_pure(definition)
    return name.removeprefix("__builtin_") in PURE or name in _TRANSPARENT


_PLAIN = (
    c_ast.Assignment,
    c_ast.BinaryOp,
    c_ast.Break,
    c_ast.Case,
    c_ast.Cast,
    c_ast.Compound,
    c_ast.Constant,
    c_ast.Continue,
    c_ast.DeclList,
    c_ast.Default,
    c_ast.DoWhile,
    c_ast.EmptyStatement,
    c_ast.ExprList,
    c_ast.For,
    c_ast.If,
    c_ast.InitList,
    c_ast.Return,
    c_ast.Switch,
    c_ast.TernaryOp,
    c_ast.Typename,
    c_ast.TypeDecl,
    c_ast.IdentifierType,
    c_ast.ArrayDecl,
    c_ast.While,
    c_ast.ArrayRef,
)


def body_is_pure(definition: Any, unit: Unit) -> bool:
    """True if a function works on its own variables and by-value parameters only, and on constants."""
    names = unit.names(definition)
    result = unit.types.of(definition.decl.type.type) if isinstance(definition.decl.type, c_ast.FuncDecl) else None
    parameters = [b for b in names.bindings if b.kind == "argument"]
    if not isinstance(result, CType) or not all(isinstance(names.type_of_binding(b), CType) for b in parameters):
        return False
    return all(_node_is_plain(node, names, unit) for node in names.nodes)


def _node_is_plain(node: Any, names: FunctionNames, unit: Unit) -> bool:
    match node:
        case c_ast.ID():
            return _name_is_plain(node, names, unit)
        case c_ast.UnaryOp():
            return node.op not in ("*", "&") and _target_is_own(node, names)
        case c_ast.Assignment():
            return _target_is_own(node, names)
        case c_ast.Decl():
            binding = names.of(node)
            return (
                "extern" not in node.storage
                and ("static" not in node.storage or _is_const(node, unit))
                and binding is not None
                and "volatile" not in unit.types.qualifiers(node)
            )
        case c_ast.FuncCall():
            called = called_name(node)
            binding = names.of(node.name) if called else None
            return called != names.function.decl.name and is_pure_function(called, binding, unit)
    return isinstance(node, _PLAIN)


def _name_is_plain(node: Any, names: FunctionNames, unit: Unit) -> bool:
    binding = names.of(node)
    if binding is None:
        return False
    if binding.kind in ("function", "enumerator"):
        return isinstance(names.parent(node), c_ast.FuncCall) or binding.kind == "enumerator"
    return binding.automatic or _is_const(binding.decl, unit)


def _is_const(decl: Any, unit: Unit) -> bool:
    """True for a ``const`` object of arithmetic type, or an array of them, that this file defines."""
    quals = unit.types.qualifiers(decl)
    return "const" in quals and "volatile" not in quals and not isinstance(decl.type, c_ast.PtrDecl)


def _target_is_own(node: Any, names: FunctionNames) -> bool:
    target = assigned_target(node)
    while isinstance(target, c_ast.ArrayRef):
        target = target.name
    if target is None:
        return True
    binding = names.of(target) if isinstance(target, c_ast.ID) else None
    return binding is not None and binding.automatic

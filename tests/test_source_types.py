"""Types, sizes, constants and scopes, checked against the compiler itself where it can say them."""

from __future__ import annotations

import subprocess
from pathlib import Path
from typing import Any

import pytest
from pycparser import c_ast
from source_marks import COMPILERS, opened

from retile.model import CType
from retile.source import ArrayOf, FunctionType, PointerTo, Source, StructType, UnknownType, Void
from retile.source.parse import nodes

DECLARATIONS = """
#include <stddef.h>
#include <stdint.h>
#include <stdbool.h>
typedef unsigned long word; typedef word words[3]; typedef const volatile short sample_t;
enum gain { LOW = -3, MID, HIGH = MID + 10, TOP = 1 << 4 | 1 }; enum plain { ZERO, ONE }; enum wide { FAR =
0x80000000u };
struct inner { char tag; double value; };
struct fields { unsigned a : 3, b : 7; int c : 23; char d; unsigned : 0; short e; long long f : 40; char g; };
struct sounding { char c; struct inner in; short s[3]; struct { int x; union { float f; char raw[6]; }; }; float
tail[]; };
union any { char c[5]; double d; int i; };
struct node { struct node *next; enum gain gain; bool flag; long double ld; };
static double grid[4][TOP]; static unsigned char bytes[sizeof(struct sounding) + 1];
static char c0; static signed char c1; static unsigned char c2; static short s0; static unsigned short s1; static
unsigned u;
static int i; static long l; static unsigned long ul; static long long ll; static unsigned long long ull; static
float f;
static double d; static long double ld; static size_t z; static ptrdiff_t p; static int8_t i8; static uint16_t u16;
static int64_t i64; static uint_fast16_t fast; static enum gain g; static enum plain e; static bool b; static
sample_t sample;
static words w; static struct sounding one, *many; static union any un; static struct node nd; static double
(*rows)[TOP];
static int (*hook)(const char *, int); static int call(int, double *); static wchar_t wide; static intptr_t ip;
static float _Complex fc; static double _Complex dc; static int list[] = { 1, 2, 3, 4 }; static char name[] = "survey";
static enum wide far;
"""

ARITHMETIC = """
c0 c1 c2 s0 s1 u i l ul ll ull f d ld z p i8 u16 i64 fast g e b sample w[1] one.in.value one.x one.f many->s[2]
many[1].in.tag un.d nd.gain nd.next->flag rows[2][3] (*rows)[1] *many->tail hook("a",1) call(1,&d) bytes[3] wide ip
c0+c1 s0*s1 u+i u+l ul+ll ull-ll u16<<1 u16>>ul z-1 i-z i8+i64 fast*2 g+1 e+1 b+b f*i f*d d+ld -c0 ~u16 !d +s1 -u i<d
c0&&d
sizeof(int) &grid[1][2]-&grid[0][0] 1 1u 1l 1ul 1ll 0x7fffffff 0x80000000 0xffffffff 2147483648 4294967296
0x8000000000000000
'a' '\\n' 1.0 1.0f 1.0L 1e3 1.f LOW (char)1 (word)i (sample_t)2 i?c0:s0 i?u:l i?f:i i,l (i=c0) (s0+=d) c0++ --s1
sizeof(list)
fc*2 dc+fc fc*d far far+1
""".split()  # noqa: SIM905

CONSTANTS = [
    text.strip()
    for text in r"""
1+2*3; -7/2; -7%3; 7%-3; 1<<10; -1>>1; 0xffu&~0xfu; 5>3; 5==3; 1?2:3; 0&&1/0; 1||1/0; !0; !5; ~0; ~0u; LOW; MID;
HIGH; TOP;
ONE; FAR; sizeof(int); sizeof(struct fields); sizeof(struct sounding); sizeof(struct node); sizeof(union any);
sizeof(words); sizeof grid; sizeof(grid[0]); sizeof bytes; sizeof list/sizeof list[0]; sizeof one.s; sizeof(char(*)[9]);
sizeof *rows; sizeof many; sizeof *many; offsetof(struct sounding,s); offsetof(struct sounding,x); sizeof "abc";
offsetof(struct sounding,raw); offsetof(struct sounding,tail); offsetof(struct fields,e); offsetof(struct fields,g);
offsetof(struct node,ld); (unsigned char)300; (char)200; (_Bool)7; (short)0x18000; (int)2.9; -1<0u; -1<0; 'a'; '\0';
'\x41';
'\101'; '\''; '\xff'; 4294967295u+1u; 10u-11u; (1ull<<63)-1; sizeof(enum gain); 3-4?5:6; 1?-1:1u; sizeof name;
0b101; 0777;
sizeof(1+1L); sizeof(c0+c1); sizeof(dc); sizeof(int[TOP][2]); (long)LOW*2; 0x7fffffff+1LL; (bool)2; -2147483647-1;
0x7fffffffffffffff; -5L/2; -5%2; (sample_t)70000; sizeof(sample); sizeof(struct inner[2]); sizeof(int*);
sizeof(void(*)(int))
""".split(";")
]


def expression_source(folder: Path, cc: str, expressions: list[str]) -> tuple[Source, list[Any]]:
    """A source that holds the expressions as statements, and their nodes."""
    from retile.source import CompilerCall, open_source

    path = folder / "survey.c"
    path.write_text(DECLARATIONS + "void probe(void) {\n" + "".join(f"({text});\n" for text in expressions) + "}\n")
    source = open_source(str(path), CompilerCall(cc))
    return source, list(source.functions[0].body.block_items)


def asked(folder: Path, cc: str, rows: list[str]) -> list[list[int]]:
    """What a program prints that evaluates each row, a list of C expressions of type long long."""
    prints = ""
    for row in rows:
        form = "%lld " * row.count("§")
        prints += f'printf("{form}\\n", {row.replace("§", "(long long)")});\n'
    program = folder / "ask.c"
    program.write_text(f"#include <stdio.h>\n{DECLARATIONS}int main(void) {{\n{prints}return 0; }}\n")
    subprocess.run([cc, "-std=gnu11", "-w", "-o", str(folder / "ask"), str(program)], check=True)
    output = subprocess.run([str(folder / "ask")], check=True, capture_output=True, text=True, timeout=20).stdout
    return [[int(word) for word in line.split()] for line in output.splitlines()]


@pytest.mark.parametrize("cc", COMPILERS)
def test_types_of_expressions_are_the_compilers(tmp_path: Path, cc: str) -> None:
    source, items = expression_source(tmp_path, cc, ARITHMETIC)
    function = source.functions[0]
    found = [source.types.of_expression(item, source.types.scope(function, item)) for item in items]
    wrong = {text: type for text, type in zip(ARITHMETIC, found) if not isinstance(type, CType)}
    assert not wrong
    answers = asked(
        tmp_path, cc,
        [f"§sizeof(__typeof__({t})), §((__typeof__({t}))0.5 != 0), §(__builtin_creal((__typeof__({t}))-1) < 0)"
         if "c*" not in t else f"§sizeof({t}), §1, §1" for t in ARITHMETIC],
    )  # fmt: skip
    for text, type, (size, floating, signed) in zip(ARITHMETIC, found, answers):
        assert isinstance(type, CType)
        boolean = type.spelling in ("bool", "_Bool")
        assert type.bits == 8 * size, text
        assert type.floating == bool(floating and not boolean), text
        assert type.signed == bool(signed and not boolean), text


@pytest.mark.parametrize("cc", COMPILERS)
def test_constants_are_the_compilers(tmp_path: Path, cc: str) -> None:
    source, items = expression_source(tmp_path, cc, CONSTANTS)
    function = source.functions[0]
    found = [source.types.constant(item, source.types.scope(function, item)) for item in items]
    values = [row[0] for row in asked(tmp_path, cc, [f"§({text})" for text in CONSTANTS])]
    expected = dict(zip(CONSTANTS, values))
    got = {text: value for text, value in zip(CONSTANTS, found)}
    unsigned = {text: value & (2**64 - 1) if value is not None else None for text, value in got.items()}
    assert {t: v for t, v in unsigned.items()} == {t: v & (2**64 - 1) for t, v in expected.items()}


def test_undefined_and_variable_expressions_are_no_constants(tmp_path: Path) -> None:
    texts = [
        "1/0",
        "5%0",
        "1<<40",
        "1<<-1",
        "0x7fffffff+1",
        "i",
        "i*0",
        "call(1,&d)",
        "d",
        "1.5",
        '"a"',
        "-1<<1",
        "i?1:1",
    ]
    source, items = expression_source(tmp_path, "cc", texts)
    scope = source.types.scope(source.functions[0])
    assert [source.types.constant(item, scope) for item in items] == [None] * len(texts)


@pytest.mark.parametrize("cc", COMPILERS)
def test_member_offsets_are_the_compilers(tmp_path: Path, cc: str) -> None:
    source, _ = expression_source(tmp_path, cc, ["1"])
    names = {"sounding": ["c", "in", "s", "x", "f", "raw", "tail"], "node": ["next", "gain", "flag", "ld"],
             "fields": ["d", "e", "g"], "inner": ["tag", "value"]}  # fmt: skip
    rows = [f"§offsetof(struct {tag}, {name})" for tag, members in names.items() for name in members]
    answers = iter(asked(tmp_path, cc, rows))
    for tag, members in names.items():
        node = source.types.file_scope.find(f"struct {tag}")
        for name in members:
            member = source.types.member(StructType("struct", tag, node), name)
            assert member is not None and [member.offset] == next(answers), (tag, name)


def test_layouts_that_attributes_change_are_unknown(tmp_path: Path) -> None:
    source = opened(
        tmp_path,
        "struct __attribute__((packed)) a { char c; int i; };\nstruct b { char c; int i; } "
        "__attribute__((aligned(64)));\n"
        "struct c { char c; _Alignas(16) int i; };\nstruct d { char c; int i; };\n"
        "typedef float quad __attribute__((vector_size(16)));\nquad q; float x;\n"
        "void f(void) { sizeof(struct a); sizeof(struct b); sizeof(struct c); sizeof(struct d); q; x; }\n",
    )
    items = source.functions[0].body.block_items
    scope = source.types.scope(source.functions[0])
    assert [source.types.constant(item, scope) for item in items[:4]] == [None, None, None, 8]
    assert isinstance(source.types.of_expression(items[4], scope), UnknownType)
    assert source.types.of_expression(items[5], scope) == CType("float", 32, True, True)
    packed = opened(tmp_path, "#pragma pack(1)\nstruct a { char c; int i; };\nvoid f(void) { sizeof(struct a); }\n")
    assert packed.types.constant(packed.functions[0].body.block_items[0]) is None


def parameters(source: Source) -> dict[str, Any]:
    """Types of all parameters of the first function."""
    function = source.functions[0]
    return {name: source.types.of_parameter(node) for name, node in source.types.parameters_of(function)}


def test_qualifiers_survive_every_spelling(tmp_path: Path) -> None:
    source = opened(
        tmp_path,
        "typedef double *restrict alone; typedef volatile int port; typedef const float *ro;\n"
        "void f(double *restrict a, double *__restrict b, const double *__restrict__ c, alone d, port *e, "
        "__volatile__ int *g,\n"
        "       _Atomic int *h, _Atomic(int) *k, ro m, double n[restrict static 4], const double o[3][4], "
        "char *const *p) {}\n",
    )
    types = parameters(source)
    assert {name for name, type in types.items() if type.restrict} == {"a", "b", "c", "d", "n"}
    assert {name for name, type in types.items() if "volatile" in type.target_quals} == {"e", "g"}
    assert {name for name, type in types.items() if "_Atomic" in type.target_quals} == {"h", "k"}
    assert {name for name, type in types.items() if "const" in type.target_quals} == {"c", "m", "o", "p"}
    assert isinstance(types["o"].target, ArrayOf) and types["o"].target.extent.value == "4"


def test_shapes_of_declarators(tmp_path: Path) -> None:
    source = opened(
        tmp_path,
        "#include <stddef.h>\nstruct grid { int rows; double *depth; };\n"
        "double f(size_t n, double a[n][n + 1], struct grid *g, double **rows, int (*op)(int), int "
        "arr(void), struct later *s) {\n"
        "  return 0; }\n",
    )
    types = parameters(source)
    double = CType("double", 64, True, True)
    assert types["n"] == CType("size_t", 64, False)
    assert isinstance(types["a"], PointerTo) and isinstance(types["a"].target, ArrayOf)
    assert types["a"].target.element == double and isinstance(types["a"].target.extent, c_ast.BinaryOp)
    assert types["rows"] == PointerTo(PointerTo(double))
    assert types["op"].target == FunctionType(CType("int", 32, True), (CType("int", 32, True),))
    assert types["arr"].target == FunctionType(CType("int", 32, True), ())
    members = source.types.members(types["g"].target)
    assert members is not None and [(m.name, m.offset) for m in members] == [("rows", 0), ("depth", 8)]
    assert types["s"].target.node is None and source.types.members(types["s"].target) is None
    assert source.types.of(source.functions[0].decl).result == double  # type: ignore[union-attr]


SCOPES = """
typedef int depth; int n = 1; double x; enum { HERE = 4 };
void f(depth n, double (*a)[n]) {
  n;
  { float n; n; typedef char depth; depth x; x; enum { HERE = 5 }; HERE; }
  for (long n = 0, m = n; n < 2; n++) { n; m; }
  n; x; HERE;
  unsigned n2 = n, x = n2; x;
  if (n) { short x; x; }
  switch (n) { case 1: ; char x; x; default: x; }
  x;
}
"""


def test_names_mean_what_their_place_says(tmp_path: Path) -> None:
    source = opened(tmp_path, SCOPES)
    function = source.functions[0]
    found = []
    for node in sorted((n for n in nodes(function.body) if isinstance(n, c_ast.ID)), key=lambda n: n.coord.number):
        if source.text[: node.coord.offset].rstrip()[-1] in "{};:":
            scope = source.types.scope(function, node)
            type = source.types.of_expression(node, scope)
            assert isinstance(type, CType)
            found.append((node.name, type.spelling, source.types.constant(node, scope)))
    assert found == [
        ("n", "depth", None), ("n", "float", None), ("x", "depth", None), ("HERE", "int", 5),
        *[("n", "long", None)] * 3, ("m", "long", None), ("n", "depth", None), ("x", "double", None), ("HERE",
        "int", 4), ("x", "unsigned int", None),
        ("x", "short", None), ("x", "char", None), ("x", "char", None), ("x", "unsigned int", None),
    ]  # fmt: skip
    block = source.functions[0].body.block_items[1]
    inner = source.types.scope(function, block.block_items[-1])
    declared = inner.lookup("x")
    assert declared is not None and (declared.where, declared.block) == ("block", block)
    assert isinstance(source.types.of_declared(declared, inner), CType)
    assert source.types.scope(function).lookup("a").where == "parameter"  # type: ignore[union-attr]
    assert set(inner.local_names()) == {"n", "a", "depth", "x", "HERE"}


def test_typeof_and_unknown_types(tmp_path: Path) -> None:
    source = opened(
        tmp_path,
        "double d; void f(int n) { __typeof__(d) a; typeof(short) b; __auto_type c = d; __int128 e; "
        "_Float128 g; __builtin_va_list h;\n"
        "a; b; c; e; g; h; ({ n++; n; }); &&end; end: ; }\n",
    )
    function = source.functions[0]
    items = function.body.block_items
    types = [source.types.of_expression(item, source.types.scope(function, item)) for item in items[6:14]]
    spellings = [type.spelling if isinstance(type, CType) else type.__class__.__name__ for type in types]
    assert spellings[:5] == ["double", "short", "UnknownType", "__int128", "_Float128"]
    assert spellings[5:] == ["UnknownType"] * 3


def test_old_style_parameters(tmp_path: Path) -> None:
    source = opened(tmp_path, "double sum(n, a, k)\ndouble *a; long n;\n{ return a[n] + k; }\n")
    assert parameters(source) == {
        "n": CType("long", 64, True), "a": PointerTo(CType("double", 64, True, True)), "k": CType("int", 32, True),
    }  # fmt: skip


def test_identifiers_hold_every_word(tmp_path: Path) -> None:
    (tmp_path / "near.h").write_text("#define HIDDEN(a) inner_##a\nstruct near_tag { int near_member; };\n")
    source = opened(
        tmp_path,
        '#include "near.h"\n#if 0\nint inactive;\n#endif\n#define OWN expansion\nint HIDDEN(x); int f(void) '
        '{ return 1; }\n',
        ("-DGIVEN=given_value",),
    )
    for word in (
        "HIDDEN",
        "inner_x",
        "near_tag",
        "near_member",
        "inactive",
        "OWN",
        "expansion",
        "GIVEN",
        "f",
        "return",
    ):
        assert word in source.identifiers, word


def test_widths_follow_the_flags(tmp_path: Path) -> None:
    source = opened(tmp_path, "char c; void f(long n) { c; }\n", ("-m32", "-funsigned-char"))
    types = parameters(source)
    assert types["n"] == CType("long", 32, True)
    assert source.types.size_of(PointerTo(Void())) == 4
    assert source.types.of_expression(source.functions[0].body.block_items[0]) == CType("char", 8, False)


def test_a_type_that_is_asked_for_before_the_structure_is_complete(tmp_path: Path) -> None:
    source = opened(tmp_path, (
        "extern struct sounding *last;\nenum { BYTES = sizeof last };\n"
        "struct sounding { int depth; double at[2]; };\nint f(void) { return last->at[1] > BYTES; }\n"))
    function, types = source.functions[0], source.types
    compared = function.body.block_items[0].expr
    assert types.constant(compared.right, types.scope(function, compared)) == 8
    for _ in range(2):
        assert types.of_expression(compared.left, types.scope(function, compared)) == CType("double", 64, True, True)


LOCAL_STRUCTURES = """
typedef float real; enum { WIDE = 9 };
typedef struct { int a; } cell;
void f(cell *cell) {
  enum { WIDE = 2 }; typedef double real; struct pair { real u[WIDE]; char c; };
  struct pair one; real x = 1;
  { typedef short real; x; }
  typedef real other; { typedef short real; other y = 1; y; }
  cell->a;
}
"""


def test_a_structure_of_a_function_means_the_names_of_its_place(tmp_path: Path) -> None:
    """ISO/IEC 9899:2018, 6.2.1 p4 and p7: an inner scope hides the outer one; a name's own declarator does not."""
    source = opened(tmp_path, LOCAL_STRUCTURES)
    function = source.functions[0]
    one, block = function.body.block_items[3], function.body.block_items[5]
    for inner in (block.block_items[1], function.body.block_items[7].block_items[2]):
        assert source.types.of_expression(inner, source.types.scope(function, inner)).bits == 64
    inner = block.block_items[1]
    assert source.types.of_expression(inner, source.types.scope(function, inner)).spelling == "real"
    assert source.types.of_expression(inner, source.types.scope(function, inner)).bits == 64
    kind = source.types.of_declared(source.types.scope(function, one).lookup("one"), source.types.scope(function, one))
    assert [(m.name, m.offset) for m in source.types.members(kind)] == [("u", 0), ("c", 16)]
    assert source.types.size_of(kind) == 24
    member = function.body.block_items[-1]
    assert source.types.of_expression(member, source.types.scope(function, member)).spelling == "int"

"""Extents of statements in the original text, in the ways in which people write C."""

from __future__ import annotations

from pathlib import Path

import pytest
from pycparser import c_ast
from source_marks import COMPILERS, extents, opened, statements, unmarked

from retile.source import Source, splice

STYLES = {
    "knr": """
void f(int n, double *a) {
    ⟦for (int i = 0; i < n; i++) {
        ⟦if (a[i] > 0) {
            a[i] = 0;
        } else ⟦if (a[i] < -1)
            a[i] = 1;
        else {
            a[i] = 2;
        }⟧⟧
    }⟧
}
""",
    "allman, tabs": """
void f(int n, double *a)
{
\t⟦for (int i = 0; i < n; i++)
\t{
\t\t⟦while (a[i] > 1)
\t\t{
\t\t\ta[i] /= 2;
\t\t}⟧
\t}⟧
}
""",
    "no braces, comments in odd places": """
void f(int n, double *a) { int i; /* for ( */
  ⟦for /* why */ (i = 0 /* ; */; i < n; // )
      i++)
    ⟦for (int j = 0; j < n; j++) ⟦for(;;) ⟦do a[i] += j; while (a[i] < 3 /* ; */)  ; ⟧⟧⟧⟧ // not this
  a[0] = 1;
}
""".replace("  ; ⟧⟧⟧⟧", "  ;⟧⟧⟧⟧"),
    "dangling else, empty statements, labels": """
int f(int n) {
  ⟦if (n) ⟦if (n > 1) ; else n = 3;⟧⟧
  again: ⟦while (n--) ;⟧
  ⟦if (n < 0) goto again;⟧
  ⟦for (;;) { ⟦if (n++ > 4) break;⟧ ; ; continue; }⟧
  return n;
}
""",
    "switch": """
int f(int n, int k) {
  ⟦switch (n) {
    case 1: case 2:
      ⟦for (k = 0; k < n; k++) n += k;⟧
      break;
    case 'x' ? 3 : 4: { ⟦if (k) n = 2;⟧ } break;
    default: ⟦do n--; while (n > 0);⟧
  }⟧
  ⟦switch (k) default: ⟦for (;;) break;⟧⟧
  return n;
}
""",
    "old style definition": """
double sum(n, a)
int n;
double *a;
{
  double s = 0; int i;
  ⟦for (i = 0; i < n; i++) s += a[i];⟧
  return s;
}
""",
    "declarations that look like bodies": """
struct sounding { double depth; int count; } one = { 1.0, 2 };
typedef struct { int x; } pair;
static int table[] = { 1, 2, 3 };
enum kind { DEEP, SHALLOW };
int (*pick(int n))(int);
_Static_assert(sizeof(int) >= 2, "int");
pair make(void) { pair p = { .x = 3 }; ⟦for (int i = 0; i < 3; i++) p.x += (struct sounding){ i, 2 }.count;⟧ return p; }
int (*pick(int n))(int) { ⟦while (n > 0) n--;⟧ return 0; }
""",
    "line joints and form feeds": """
void f(int n, int *a) {\f
  int i; ⟦fo\\
r (i = 0; i < n; \\
    i++) {
    a[i] \\
      = 1;
  }⟧
\f}
""",
    "digraphs": """
void f(int n, int a<::>) <%
  ⟦for (int i = 0; i < n; i++) <% a<:i:> = 0; %>⟧
%>
""",
    "GNU attributes and spellings": """
__attribute__((noinline, target("sse2"))) static __inline__ void
f(int n, double *__restrict__ a, const double *__restrict b) __attribute__((hot));
static __inline__ void f(int n, double *__restrict__ a, const double *__restrict b)
{
  double t[4] __attribute__((aligned(64))) = { 0 };
  __extension__ int k = 3;
  ⟦for (__typeof__(n) i = 0; i < n; i++) {
    __asm__ volatile ("" ::: "memory");
    ⟦if (__builtin_expect(a[i] > 0, 0)) a[i] = ({ double z = b[i]; z + k; }) + t[0];⟧
  }⟧
  ⟦switch (n) { case 1: n = 2; __attribute__((fallthrough)); case 2 ... 5: n = 3; }⟧
}
""",
}


@pytest.mark.parametrize("style", STYLES)
@pytest.mark.parametrize("ends", ["\n", "\r\n"])
@pytest.mark.parametrize("cc", COMPILERS)
def test_extents_in_every_style(tmp_path: Path, style: str, ends: str, cc: str) -> None:
    marked = STYLES[style].replace("\n", ends)
    text, expected = unmarked(marked)
    source = opened(tmp_path, text, cc=cc)
    assert source.text == text
    assert {source.text[a:b] for a, b in extents(source)} == {text[a:b] for a, b in expected}
    assert extents(source) == expected
    assert source.encode(source.text) == (tmp_path / "survey.c").read_bytes()


MACROS = {
    "macros inside expressions keep the extent": """
#include <stddef.h>
#define AT(a, i, j) (a)[(i) * cols + (j)]
#define N 10
#define LESS(x, y) ((x) < (y))
#define NOTHING
#define GLUE(a, b) a ## b
#define SHOW(x) #x
const char *f(size_t cols, double *a) {
  ⟦for (size_t i = 0; LESS(i, N); i++)
    ⟦for (size_t j = 0; j < cols; j++) NOTHING
      AT(a, i, j) = AT(a, LESS(i,
          j), j) + GLUE(1, 0) + sizeof SHOW("a;}" , );⟧⟧
  return SHOW(for (;;) { );
}
""".replace('SHOW("a;}" , )', 'SHOW("a;}")').replace("SHOW(for (;;) { )", "SHOW(for {)"),
    "loops that come out of macros are unknown": """
#define EACH(i, n) for (int i = 0; i < (n); i++)
#define TWICE(s) do { s; s; } while (0)
#define IF(c) if (c)
#define BEGIN {
#define END }
void f(int n, int *a) {
  EACH(i, n) a[i] = 0;
  EACH(i, n) { ⟦for (int j = 0; j < n; j++) a[j] = i;⟧ }
  TWICE(a[0]++);
  IF(n > 2) a[1] = 2;
  for (int i = 0; i < n; i++) BEGIN a[i] = 1; END
  ⟦for (int i = 0; i < n; i++) EACH(j, n) a[i] = j;⟧
}
""".replace("  for (int i = 0; i < n; i++) BEGIN a[i] = 1; END", "  ⟦for (int i = 0; i < n; i++) BEGIN a[i] = 1; END⟧"),
    "a macro that closes what it did not open": """
#define CLOSE ; }
#define OPEN_LOOP for (int i = 0; i < n; i++) {
void f(int n, int *a) {
  for (int i = 0; i < n; i++) { a[i] = 1 CLOSE
  OPEN_LOOP a[i] = 2; }
  ⟦for (int i = 0; i < n; i++) a[i] = 1;⟧
}
""".replace("  for (int i = 0; i < n; i++) { a[i] = 1 CLOSE", "  ⟦for (int i = 0; i < n; i++) { a[i] = 1 CLOSE⟧"),
    "redefined and undefined macros": """
#define N 3
void f(int n, int *a) {
  ⟦for (int i = 0; i < N; i++) a[i] = 0;⟧
#undef N
#define N n - \\
   1
  ⟦for (int i = 0; i < N; i++) a[i] = 0;⟧
#undef N
  int N = 2;
  ⟦for (int i = 0; i < N; i++) a[i] = 0;⟧
}
""",
    "macros that name each other and themselves": """
int A, C;
#define f(x) (x + f(x))
#define g() 7
#define h g
#define A B
#define B A + C
#define C 2
int (f)(int), g0;
int k(int n, int g0) {
  ⟦for (int i = 0; i < h(); i++) n += f(f(i)) + A * B;⟧
  ⟦for (int i = 0; i < n; i++) n += h () + __LINE__ + sizeof __FILE__;⟧
  return n;
}
""",
    "variable arguments": """
int printf(const char *, ...);
#define LOG(form, ...) printf(form, ##__VA_ARGS__)
#define CALL(f, args...) f(args)
#define LAST(a, ...) (0, __VA_ARGS__)
void f(int n) {
  ⟦for (int i = 0; i < n; i++) { LOG("x"); LOG("%d", i); CALL(printf, "%d", LAST(1, 2, 3)); }⟧
}
""",
    "headers of the system bring macros": """
#include <assert.h>
#include <limits.h>
#include <math.h>
#include <stdbool.h>
#include <stdint.h>
#include <inttypes.h>
#include <stdio.h>
void f(int64_t n, double *a) {
  ⟦for (int64_t i = 0; i < INT_MAX; i++) {
    assert(i < n && "inside");
    ⟦if (isnan(a[i]) == true) a[i] = M_PI * INFINITY + NAN;⟧
    printf("%" PRId64 "\\n", i);
  }⟧
}
""",
}


@pytest.mark.parametrize("case", MACROS)
@pytest.mark.parametrize("compiler_headers", [False, True])
@pytest.mark.parametrize("cc", COMPILERS)
def test_extents_beside_macros(tmp_path: Path, case: str, compiler_headers: bool, cc: str) -> None:
    text, expected = unmarked(MACROS[case])
    source = opened(tmp_path, text, cc=cc)
    if compiler_headers:
        source = Source(source.path, source.text, source.encoding, source.call, stubs=False)
    assert {source.text[a:b] for a, b in extents(source)} == {text[a:b] for a, b in expected}
    assert extents(source) == expected


BRANCHES = """
void f(int n, double *a) {
#ifdef FAST
  ⟦for (int i = 0; i < n; i += 2) {
#else
  ⟦for (int i = 0; i < n; i++) {
#endif
    a[i] = 1;
#if 0
    for (;;) }
#elif defined(FAST) && FAST > 1
    ⟦if (n) a[i] = 2;⟧
#else
    ⟦while (n) n--;⟧
#endif
  }⟧
}
"""


@pytest.mark.parametrize("cc", COMPILERS)
def test_only_active_branches_have_extents(tmp_path: Path, cc: str) -> None:
    for flags, loop, gone in (((), "i++", "i += 2"), (("-DFAST=2",), "i += 2", "i++"), (("-DFAST",), "i += 2", "i++")):
        text = BRANCHES.replace("⟦", "").replace("⟧", "")
        source = opened(tmp_path, text, flags, cc=cc)
        (outer,) = statements(source, c_ast.For)
        span = source.span(outer)
        assert span is not None
        header = source.header_span(outer)
        assert header is not None and loop in source.slice(header) and gone not in source.slice(header)
        assert source.slice(span).endswith("#endif\n  }")
        words = [token.text.split()[0] for token in source.directives_in(span)]
        assert words[-4:] == ["#if", "#elif", "#else", "#endif"]
        (inner,) = statements(source, (c_ast.If, c_ast.While))
        assert isinstance(inner, c_ast.If) == (flags == ("-DFAST=2",))
        assert source.span(inner) is not None


def test_parts_of_a_header(tmp_path: Path) -> None:
    source = opened(
        tmp_path,
        "#define LAST(n) ((n) - 1)\n"
        "void f(int n) { int i;\n"
        "for (int j = 0 , k = n /* c */ ; j < LAST(n) ; ++ j ) ;\n"
        "for (; ; ) if ( n > 1 /* x */ ) break; else continue;\n"
        "do n--; while ( n );\n"
        "while (( n )) n--; for (i = 0; i < n; ) { }}\n",
    )
    loops = statements(source, c_ast.For)
    parts = [[source.slice(part) for part in source.for_parts(loop) or ()] for loop in loops]
    assert parts == [["int j = 0 , k = n", "j < LAST(n)", "++ j"], ["", "", ""], ["i = 0", "i < n", ""]]
    assert [source.slice(source.header_span(loop)) for loop in loops] == [  # type: ignore[arg-type]
        "for (int j = 0 , k = n /* c */ ; j < LAST(n) ; ++ j )", "for (; ; )", "for (i = 0; i < n; )",
    ]  # fmt: skip
    others = statements(source, (c_ast.If, c_ast.DoWhile, c_ast.While))
    assert [source.slice(source.condition_span(node)) for node in others] == ["n > 1", "n", "( n )"]  # type: ignore[arg-type]
    assert [source.slice(source.body_span(node)) for node in others] == ["break;", "n--;", "n--;"]  # type: ignore[arg-type]
    assert source.for_parts(others[0]) is None and source.condition_span(loops[0]) is None


def test_simple_statements_and_shared_declarations(tmp_path: Path) -> None:
    text = (
        "int f(int n, int *a) {\n  static int x = 1, *y = 0, z[2] = { 1, 2 };\n"
        "  a [ 0 ] = n , n ++ ;\n  ;\n  return (n);\n}\n"
    )
    source = opened(tmp_path, text)
    items = source.functions[0].body.block_items
    assert [source.slice(source.span(item)) for item in items] == [  # type: ignore[arg-type]
        *["static int x = 1, *y = 0, z[2] = { 1, 2 };"] * 3, "a [ 0 ] = n , n ++ ;", ";", "return (n);",
    ]  # fmt: skip
    span = source.function_span(source.functions[0])
    assert span is not None and source.slice(span) == text.strip()


@pytest.mark.parametrize("cc", COMPILERS)
def test_pragmas_stand_beside_extents(tmp_path: Path, cc: str) -> None:
    source = opened(
        tmp_path,
        "#define HINT(x) _Pragma(#x)\n#define PLAIN\nvoid f(int n, double *a) {\n"
        "#pragma omp parallel for \\\n    schedule(static)\n"
        "  for (int i = 0; i < n; i++) {\n"
        "    HINT(omp simd) PLAIN for (int j = 0; j < n; j++) a[j] += i;\n"
        '    _Pragma("unroll") for (int j = 0; j < n; j++) a[j] += i;\n'
        "  }\n  PLAIN\n  for (int i = 0; i < n; i++) ;\n}\n",
        cc=cc,
    )
    loops = statements(source, c_ast.For)
    spans = [source.span(loop) for loop in loops]
    assert all(spans)
    before = [[token.text for token in source.directives_before(span)] for span in spans if span]
    assert before == [["#pragma omp parallel for \\\n    schedule(static)"], ["HINT"], ["_Pragma"], []]
    assert [token.text for token in source.directives_in(spans[0])] == ["HINT", "_Pragma"]  # type: ignore[arg-type]
    assert source.directives_in(spans[1]) == ()  # type: ignore[arg-type]


def test_files_with_line_directives_keep_their_own_lines(tmp_path: Path) -> None:
    text = (
        '#line 400 "other.y"\n#include "near.h"\nint f(depth n) {\n# 7 "third.c"\n'
        "  for (int i = 0; i < n; i++) n--;\n  return n;\n}\n"
    )
    (tmp_path / "near.h").write_text("typedef int depth;\n")
    source = opened(tmp_path, text)
    (loop,) = statements(source, c_ast.For)
    assert (loop.coord.line, loop.coord.column) == (5, 3)
    assert source.slice(source.span(loop)) == "for (int i = 0; i < n; i++) n--;"  # type: ignore[arg-type]


def test_functions_of_headers_are_not_of_this_file(tmp_path: Path) -> None:
    (tmp_path / "shared.h").write_text("static inline int twice(int x) { for (;;) return 2 * x; }\n")
    source = opened(tmp_path, '#include "shared.h"\nint f(int n) { return twice(n); }\n')
    assert [function.decl.name for function in source.functions] == ["f"]
    header = next(node for node in source.ast.ext if isinstance(node, c_ast.FuncDef))
    assert header.decl.name == "twice" and source.span(header.body) is None and source.function_span(header) is None
    assert header.body.block_items[0].coord.file.endswith("shared.h")


@pytest.mark.parametrize(
    "data",
    [
        b"\xef\xbb\xbfint f(void) { for (;;) ; }\n",
        "/* Tiefe \u00b5 */ int f(void) { for (;;) ; }".encode(),
        b"/* \xb5m \xff */ int f(void) { for (;;) ; }",
        b"int f(void) { for (;;) ; }\r\n// end\\",
        b"int f(void)\r\n{\r\n\tfor (;;) ;\n}\r",
    ],
)
def test_every_byte_survives(tmp_path: Path, data: bytes) -> None:
    source = opened(tmp_path, data)
    assert source.encode(source.text) == data
    (loop,) = statements(source, c_ast.For)
    span = source.span(loop)
    assert span is not None and source.slice(span) == "for (;;) ;"
    changed = source.encode(splice(source.text, [(span.start, span.end, "while (1) ;")]))
    assert changed == data.replace(b"for (;;) ;", b"while (1) ;")


def test_a_tree_is_the_same_as_without_extents(tmp_path: Path) -> None:
    """Printed and parsed again by pycparser alone, the tree is the same."""
    from pycparser import CParser
    from pycparser.c_generator import CGenerator

    text, _ = unmarked(STYLES["knr"] + STYLES["switch"].replace("f(", "g("))
    source = opened(tmp_path, text)
    printed = CGenerator().visit(source.ast)
    assert printed == CGenerator().visit(CParser().parse(text.replace("\r", "")))

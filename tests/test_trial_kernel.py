"""A nest in a file of its own: what stays of the user's text, and which C can be taken apart."""

import pytest
from trial_case import FAST, case

from retile.model import RetileError
from retile.source import CompilerCall
from retile.trial.kernel import kernel_of

SURVEY = """\
#include <stdio.h>
#include "layers.h"
#define GAIN 2.0
static double half(double x) { return x / 2; }
static double unused(double x) {
#define LATER 3
    return elsewhere(x);
}
void spread(int n, double z[n]) {
    printf("%d\\n", n);
#define AT(i) z[(i)]
    for (int i = 0; i < n; i++) {
        AT(i) = z[i] * GAIN + LAYERS + LATER; /* } { */
    }
#undef AT
    puts("done");
}
int main(void) { double z[4] = {0}; spread(4, z); return (int)half(z[0]); }
"""


@pytest.fixture
def survey(tmp_path):
    (tmp_path / "layers.h").write_text("enum { LAYERS = 3 };\ndouble elsewhere(double);\n")
    return case(tmp_path, SURVEY)


def test_lines_stay_where_they_were(survey):
    text = kernel_of(survey.source, survey.nest).text().decode()
    lines = text.splitlines()
    assert lines[0] == f'#line 1 "{survey.source.path}"'
    for number, line in enumerate(SURVEY.splitlines(), 1):
        if "for (" in line or "AT(i) =" in line or line.startswith("#"):
            assert lines[number].endswith(line.strip()), number


def test_bodies_go_and_directives_stay(survey):
    text = kernel_of(survey.source, survey.nest).text().decode()
    assert "elsewhere(x)" not in text and 'puts("done")' not in text and 'printf("%d' not in text
    assert "#define LATER 3" in text and "#undef AT" in text and "spread(4, z)" not in text


def test_the_file_itself_is_left_alone(survey, tmp_path):
    before = sorted(path.name for path in tmp_path.iterdir())
    survey.accepts(survey.variant(survey.text))
    assert (tmp_path / "survey.c").read_text() == SURVEY
    assert sorted(path.name for path in tmp_path.iterdir()) == before


def test_own_headers_macros_and_a_main_function(survey):
    assert survey.accepts(survey.variant(survey.text)).cases
    survey.tells_apart(survey.replaced("* GAIN", "/ GAIN"))


ACCEPTED = {
    "a helper that the nest calls": (
        "static double half(double x) { return x / 2; }\n"
        "static double quarter(double x) { return half(half(x)); }\n"
        "void f(int n, double *z) {\n for (int i = 0; i < n; i++) z[i] = quarter(z[i]);\n}\n",
        "quarter(z[i])",
        "half(z[i])",
    ),
    "types inside the function": (
        "void f(int n, double *z) {\n typedef double depth;\n struct pair { double a, b; };\n enum { TWO = 2 };\n"
        " struct pair p = {1, 2}; depth q = 3;\n for (int i = 0; i < n; i++) { z[i] = z[i] * TWO + p.a + q; }\n}\n",
        "* TWO",
        "/ TWO",
    ),
    "a local array of variable length": (
        "double f(int n, int m) {\n double z[n][m];\n for (int i = 0; i < n; i++)\n  for (int j = 0; j < m; j++)\n"
        "   z[i][j] = i - 2 * j;\n return z[0][0];\n}\n",
        "i - 2 * j",
        "i - 3 * j",
    ),
    "a static array of the function": (
        "double f(int n) {\n static double z[64];\n if (n > 64) n = 64;\n for (int i = 0; i < 64; i++)\n"
        "   z[i] += i;\n return z[0];\n}\n",
        "+= i",
        "-= i",
    ),
    "objects of the file, also const and extern ones": (
        "double z[8][5];\nstatic float w[5];\nextern double far[8];\n"
        "static const double k[5] = {1, 2, 3, 4, 5};\nint n = 3;\n"
        "void f(void) {\n for (int i = 0; i < 8; i++)\n  for (int j = 0; j < 5; j++)\n"
        "   z[i][j] += w[j] * k[j] * far[i];\n}\n",
        "w[j] * k[j]",
        "w[j] + k[j]",
    ),
    "a pointer of the file": (
        "static double *z; static int n;\nvoid f(void) {\n for (int i = 0; i < n; i++)\n  z[i] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "a struct behind a pointer": (
        "struct grid { int rows; char tag; double *depth; double rim[4]; };\nvoid f(struct grid *g) {\n"
        " for (int i = 0; i < g->rows; i++)\n  g->depth[i] += g->rim[1];\n}\n",
        "g->rim[1]",
        "g->rim[2]",
    ),
    "a struct that is const": (
        "struct grid { int rows; double *depth; };\nvoid f(const struct grid *g) {\n"
        " for (int i = 0; i < g->rows; i++)\n  g->depth[i] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "a struct by value": (
        "typedef struct { int rows; double *depth; } grid;\nvoid f(grid g) {\n"
        " for (int i = 0; i < g.rows; i++)\n  g.depth[i] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "an array of structs": (
        "typedef struct { float x; short y; } point;\nvoid f(int n, point *p) {\n"
        " for (int i = 0; i < n; i++)\n  p[i].x = p[i].y * 2;\n}\n",
        "p[i].y * 2",
        "p[i].y * 3",
    ),
    "an old-style function": (
        "void f(n, z) int n; double *z; {\n int i;\n for (i = 0; i < n; i++)\n  z[i] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "all kinds of numbers": (
        "#include <stdint.h>\n#include <stdbool.h>\n"
        "void f(int n, long double *a, int8_t *b, uint64_t *c, bool *d, _Bool *e) {\n"
        " for (int i = 0; i < n; i++) {\n"
        "  a[i] *= 2; b[i] = b[i] / 2; c[i] = c[i] * 7; d[i] = !d[i]; e[i] = d[i] && e[i];\n }\n}\n",
        "c[i] * 7",
        "c[i] * 8",
    ),
    "negative subscripts": (
        "void f(int n, double *z) {\n for (int i = -n; i <= n; i++)\n  z[i] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "pointers to rows": (
        "void f(int n, int m, double (*z)[m]) {\n for (int i = 0; i < n; i++)\n  for (int j = 0; j < m; j++)\n"
        "   z[i][j] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "a pointer that the function works out": (
        "void f(long n, double *z) {\n double *const end = z + n, *last = end - 1;\n for (long i = 0; i < n; i++)\n"
        "  last[-i] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "pointers to rows that lie anywhere": (
        "void f(double **z, int n, int m) {\n for (int i = 0; i < n; i++)\n  for (int j = 0; j < m; j++)\n"
        "   z[i][j] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "structs within structs": (
        "typedef struct { double x, y; } mark;\n"
        "typedef struct { int rows, cols; double **row; float w[3][3]; mark m; } chart;\n"
        "void f(chart *c) {\n for (int i = 0; i < c->rows; i++)\n  for (int j = 0; j < c->cols; j++)\n"
        "   c->row[i][j] += c->w[1][2] * c->m.y;\n}\n",
        "c->m.y",
        "c->m.x",
    ),
    "pointers and unnamed structs in a struct": (
        "struct mesh { struct { int nx, ny; } size; double *h[2]; };\nvoid f(struct mesh *m) {\n"
        " for (int y = 0; y < m->size.ny; y++)\n  for (int x = 0; x < m->size.nx; x++)\n"
        "   m->h[1][y * m->size.nx + x] = m->h[0][y * m->size.nx + x];\n}\n",
        "= m->h[0]",
        "= 2 * m->h[0]",
    ),
    "a packed struct": (
        "struct __attribute__((packed)) sounding { char c; double v; };\nvoid f(int n, struct sounding *s) {\n"
        " float lane[16] = {0};\n if (n > 3)\n  for (int i = 0; i < n; i++)\n   s[i].v = s[i].v * lane[3];\n}\n",
        "lane[3]",
        "lane[4]",
    ),
    "an array of unknown length in another file": (
        "extern double basin[][12];\nvoid f(int n) {\n for (int i = 0; i < n; i++)\n  for (int j = 0; j < 12; j++)\n"
        "   basin[i][j] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "part of an array": (
        "void f(int n, double z[n], int from, int to) {\n for (int i = from; i < to; i++)\n  z[i] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "an array of pointers": (
        "void f(int n, double *z[8]) {\n for (int k = 0; k < 8; k++)\n  for (int i = 0; i < n; i++)\n"
        "   z[k][i] *= 2;\n}\n",
        "*= 2",
        "*= 3",
    ),
    "enumerations": (
        "enum kind { A, B, C };\nvoid f(int n, enum kind *k) {\n for (int i = 0; i < n; i++)\n"
        "  k[i] = k[i] == A ? B : C;\n}\n",
        "B : C",
        "C : B",
    ),
    "an iterator used afterwards": (
        "int f(int n, double *z) {\n int i;\n for (i = 0; i < n; i++)\n  z[i] *= 2;\n return i;\n}\n",
        "i < n; i++)",
        "i < n; i++); i = 0; if (i)",
    ),
    "a sum that is returned": (
        "double f(int n, const double *z) {\n double sum = 0;\n for (int i = 0; i < n; i++)\n  sum += z[i];\n"
        " return sum;\n}\n",
        "sum += z[i]",
        "sum -= z[i]",
    ),
}


@pytest.mark.parametrize("what", ACCEPTED)
def test_nests_of_every_kind_run_on_their_own(tmp_path, what):
    text, old, new = ACCEPTED[what]
    one = case(tmp_path, text)
    found = one.tells_apart(one.replaced(old, new))
    assert found.difference is not None, found.failure


def test_flags_of_the_file_count(tmp_path):
    call = CompilerCall(flags=("-DWIDTH=7", "-std=gnu11"))
    one = case(tmp_path, "void f(double z[WIDTH]) {\n for (int i = 0; i < WIDTH; i++)\n  z[i] *= 2;\n}\n", call)
    one.tells_apart(one.replaced("i < WIDTH", "i < WIDTH - 1"))


def test_carriage_returns_and_latin_letters(tmp_path):
    path = tmp_path / "latin.c"
    path.write_bytes(
        "/* Tiefe in Fu\xdf */\r\nvoid f(int n, double *z)\r\n{\r\n  for (int i = 0; i < n; i++)\r\n"
        "    z[i] *= 2;\r\n}\r\n".encode("latin-1")
    )
    from trial_case import of_file

    one = of_file(str(path))
    one.accepts(one.variant(one.text))


def test_a_variant_brings_its_headers(tmp_path):
    one = case(tmp_path, "void f(int n, double *z) {\n for (int i = 0; i < n; i++)\n  z[i] *= 2;\n}\n")
    text = "for (uintptr_t i = 0; (int)i < n; i++)\n  z[i] *= 2;"
    assert not one.verify(one.variant(text)).verified
    one.accepts(one.variant(text, includes=("<stdint.h>",)))


def test_names_of_the_user_do_not_clash(tmp_path):
    one = case(
        tmp_path,
        "static int trial_kernel, trial_face;\nvoid f(int n, double *trial_entry) {\n"
        " for (int i = 0; i < n; i++)\n  trial_entry[i] *= 2 + trial_kernel + trial_face;\n}\n",
    )
    one.accepts(one.variant(one.text))

"""The judge's interpreter: its C against the C compiler, its log and its order against orders counted by hand."""

from __future__ import annotations

import ctypes
import subprocess

import pytest

from oracle import compare, judge_of, observe, parse_terms, times_of, verdict_at
from oracle_run import Program
from random_nests import seeded_nest
from oracle_text import INT, LONG, UCHAR, UINT, ULONG, TooLong, Undefined, common, parse
from retile.judge.judge import Setting
from retile.judge.memory import Machine
from retile.judge.program import Program as Judged
from retile.judge.tags import Book

SWEEP = """void settle(int n, int m, double depth[n][m]) {
    for (int i = 1; i < n; i++)
        for (int j = 0; j < m - 1; j++)
            depth[i][j] = 0.5 * depth[i - 1][j + 1];
}
"""


def test_instances_come_in_the_order_of_the_text():
    found = observe(SWEEP, "settle", 2, {"n": 3, "m": 3})
    assert [tuple(x.iterators.values()) for x in found] == [(1, 0), (1, 1), (2, 0), (2, 1)]
    cells = [(obj.name, offset // 8, writes) for obj, offset, writes in found[2].accesses if obj.kind == "caller"]
    assert cells == [("depth", 1 * 3 + 1, False), ("depth", 2 * 3, True)]


def test_distance_1_minus_1_forbids_interchange():
    # The example of every textbook, e.g. Allen & Kennedy, "Optimizing Compilers for Modern Architectures", 2001, ch. 5.
    assert verdict_at(SWEEP, "settle", 2, "j i", {"n": 4, "m": 4}).contradicts_legal
    assert not verdict_at(SWEEP, "settle", 2, "i j", {"n": 4, "m": 4}).contradicts_legal
    assert verdict_at(SWEEP, "settle", 2, "j:2 i j", {"n": 4, "m": 4}).contradicts_legal
    assert not verdict_at(SWEEP, "settle", 2, "i (i+j):2 j", {"n": 4, "m": 4}).contradicts_legal
    assert not verdict_at(SWEEP, "settle", 2, "(i+j):2 i j", {"n": 5, "m": 5}).contradicts_legal


def test_a_clash_needs_room():
    assert not verdict_at(SWEEP, "settle", 2, "j i", {"n": 2, "m": 9}).contradicts_legal
    assert not verdict_at(SWEEP, "settle", 2, "j:4 i j", {"n": 9, "m": 5}).contradicts_legal
    assert verdict_at(SWEEP, "settle", 2, "j:4 i j", {"n": 9, "m": 6}).contradicts_legal


def test_terms_of_a_plan():
    terms = parse_terms("k:64 (2*t+i):8 i@14 (t-k) ; packed a")
    assert [(t.loops, t.chunk) for t in terms] == [
        ((("k", 1),), 64), ((("t", 2), ("i", 1)), 8), ((("i@14", 1),), None), ((("t", 1), ("k", -1)), None)]


def test_time_of_down_counting_and_strided_loops():
    text = """void tide(int n, double *h) {
    for (int i = n; i > 0; i -= 3)
        for (int j = i; j >= 0; j -= 2)
            h[j] = i;
}
"""
    found = observe(text, "tide", 2, {"n": 5})
    assert [(x.iterators["i"], x.iterators["j"]) for x in found] == [(5, 5), (5, 3), (5, 1), (2, 2), (2, 0)]
    # i: iteration numbers 0, 0, 0, 1, 1; j starts at i, so it is placed by -j, chunks of 2 iterations span 4 values
    assert times_of(found, "j:2 i j") == [(-2, 0, -5), (-1, 0, -3), (-1, 0, -1), (-1, 1, -2), (0, 1, 0)]


def test_statements_outside_a_loop_stand_before_or_after_it():
    text = """void beam(int n, int m, double *p, double a[n][m]) {
    for (int i = 0; i < n; i++) {
        p[i] = 0.0;
        for (int k = 0; k < m; k++)
            p[i] += a[i][k];
        p[i] *= 2.0;
    }
}
"""
    assert not verdict_at(text, "beam", 2, "k i", {"n": 3, "m": 3}).contradicts_legal
    assert not verdict_at(text, "beam", 2, "k:2 i k", {"n": 3, "m": 3}).contradicts_legal
    assert not verdict_at(text, "beam", 2, "i:2 k:2 i k", {"n": 3, "m": 5}).contradicts_legal


def test_private_scalar_must_stay_in_one_piece():
    text = """void beam(int n, int m, double *p, double a[n][m]) {
    for (int i = 0; i < n; i++) {
        double sum = 0.0;
        for (int k = 0; k < m; k++)
            sum += a[i][k];
        p[i] = sum;
    }
}
"""
    assert verdict_at(text, "beam", 2, "k i", {"n": 3, "m": 3}).contradicts_legal
    blocked = verdict_at(text, "beam", 2, "i:2 i k", {"n": 3, "m": 3})
    assert not blocked.contradicts_legal


def test_tags_tell_a_reordered_sum_from_the_sum():
    up = "void f(int n, double *s, double *a) { for (int i = 0; i < n; i++) s[0] += a[i]; }"
    down = "void f(int n, double *s, double *a) { for (int i = n; i-- > 0;) s[0] += a[i]; }"
    held = """void f(int n, double *s, double *a) {
        double t = s[0]; for (int i = 0; i < n; i++) t = t + a[i]; s[0] = t; }"""
    assert compare(up, up, "f", {"n": 4}) == []
    assert compare(up, down, "f", {"n": 4}) == [
        "s[0] ends with another value; in the original comes ((((s[0] + a[0]) + a[1]) + a[2]) + a[3]), "
        "in the variant ((((s[0] + a[3]) + a[2]) + a[1]) + a[0])"]
    assert compare(up, down, "f", {"n": 4}, reassociate=True) == []
    assert compare(up, down, "f", {"n": 1}) == []
    assert compare(up, held, "f", {"n": 4}) == []
    assert compare(up, held, "f", {"n": 0}) == ["it writes s[0], which the original does not touch"]


def test_tags_see_a_missing_and_an_extra_iteration():
    whole = "void f(int n, double *s) { for (int i = 0; i < n; i++) s[i] = i; }"
    short = "void f(int n, double *s) { for (int i = 0; i < n / 2 * 2; i++) s[i] = i; }"
    assert compare(whole, short, "f", {"n": 4}) == []
    assert compare(whole, short, "f", {"n": 5}) == ["s[4] is never written; the original leaves 4.0 there"]
    assert compare(short, whole, "f", {"n": 5}) == ["it writes s[4], which the original does not touch"]


def test_undefined_behaviour_is_noticed():
    far = "void f(int n, double a[n][n]) { for (int i = 0; i <= n; i++) a[0][i] = 0; }"
    with pytest.raises(Undefined):
        judge_of(far, "f").at(Setting.of({"n": 3}))
    outermost = "void f(int n, double a[n][n]) { for (int i = 0; i <= n; i++) a[i][0] = 0; }"
    judge_of(outermost, "f").at(Setting.of({"n": 3}))  # C11 6.7.6.3, paragraph 7: a parameter's outermost extent is not kept
    overflow = "void f(int n, int *a) { for (int i = 0; i < 3; i++) a[i] = n + i; }"
    with pytest.raises(Undefined):
        judge_of(overflow, "f").at(Setting.of({"n": 2147483646}))
    unset = "double f(int n) { double x; return x + n; }"
    with pytest.raises(Undefined):
        judge_of(unset, "f").at(Setting.of({"n": 3}))


def test_usual_arithmetic_conversions():
    # C11 6.3.1.1 and 6.3.1.8, for the LP64 model.
    assert common(UCHAR, UCHAR) is INT
    assert common(INT, UINT) is UINT
    assert common(UINT, LONG) is LONG
    assert common(LONG, ULONG) is ULONG


INTEGER_FUNCTIONS = """
#define SWATH(x) ((x) * 3 + 1)
typedef unsigned char ping;
static int clip(int x, int low, int high) { return x < low ? low : x > high ? high : x; }
enum { NEAR = 3, FAR = NEAR + 4 };
static const int table[] = { 2, 3, 5, 7 };
struct cell { int depth; short quality; };
long wrap_unsigned(int n) { unsigned a = 5u; return a - (unsigned)n; }
long mixed(int n) { return n < sizeof(int) ? -1 : 1; }
long narrow(int n) { ping p = 250; for (int i = 0; i < n; i++) p++; return p; }
long shifts(int n) { return (1L << n) >> 1 | (n & 6) ^ 1; }
long division(int n) { return -n / 3 * 10 + -n % 3; }
long macro(int n) { return SWATH(n - 1); }
long loops(int n) { long s = 0; int i = n;
    while (i --> 0) { if (i % 3 == 1) continue; if (i > 40) break; s = s * 7 + i; }
    do { s += 2; } while (s < 10); return s; }
long helper(int n) { return clip(n, NEAR, FAR) + table[clip(n, 0, 3)]; }
long members(int n) { struct cell grid[3] = { { 1, 2 }, { 3 } }; grid[2] = grid[1]; grid[2].quality += (short)n;
    struct cell *at = &grid[2]; at->depth--; return at->depth * 100 + grid[2].quality + (long)sizeof grid; }
long pointers(int n) { int a[4][5]; for (int i = 0; i < 4; i++) for (int j = 0; j < 5; j++) a[i][j] = i * 10 + j;
    int *p = &a[1][0]; return p[n % 5] * 3 + *(p + 1) + (&a[2][1] - p) + (long)sizeof a[0]; }
long logic(int n) { return (n > 2 && n < 5) * 4 + !(n == 3) * 2 + (n || 0) + ~n + (n, 7); }
long vla(int n) { int a[n + 1]; a[n] = 4; return (long)sizeof a + a[n]; }
long casts(int n) { return (signed char)(n * 50) + (long)(unsigned char)(-n) + (unsigned short)-1; }
long doubles(int n) { double x = n / 2 + n / 2.0; return (long)(x * 1.0e1) + 0x1F + 'a' + 017; }
"""
NAMES = ["wrap_unsigned", "mixed", "narrow", "shifts", "division", "macro", "loops", "helper", "members", "pointers",
         "logic", "vla", "casts", "doubles"]


@pytest.fixture(scope="module")
def compiled(tmp_path_factory):
    folder = tmp_path_factory.mktemp("oracle")
    (folder / "f.c").write_text(INTEGER_FUNCTIONS)
    subprocess.run(["cc", "-shared", "-fPIC", "-O0", "-o", folder / "f.so", folder / "f.c"], check=True)
    return ctypes.CDLL(str(folder / "f.so"))


@pytest.mark.parametrize("name", NAMES)
def test_the_oracle_computes_as_the_compiler_does(compiled, name):
    function = getattr(compiled, name)
    function.restype, function.argtypes = ctypes.c_long, [ctypes.c_int]
    program = Program(INTEGER_FUNCTIONS)
    for n in (0, 1, 2, 3, 4, 7, 11, 60):
        if name == "shifts" and n > 40:
            continue
        found = program.run(name, {"n": n}).result
        assert getattr(found, "v", found) == function(n), (name, n)


def run(text, sizes, steps=20_000):
    """A program and the machine on which it ran."""
    program = Judged(parse(text), Book())
    machine = Machine(program.book, sizes, steps)
    result = program.run("survey", machine)
    machine.check_far()
    return program, machine, result


@pytest.mark.parametrize("seed", range(900_000, 900_040))
def test_random_nests_compute_as_compiled(seed, tmp_path):
    """The judge's numbers, not only its tags, are the machine's: random nests with arrays of double or int."""
    case = seeded_nest(seed)
    signature = next(line for line in case.text.splitlines() if "survey(" in line)
    if "static" in case.text or "float" in case.text or "struct" in signature or "**" in signature:
        pytest.skip("float is computed as double, and static arrays cannot be looked at")
    sizes = {"n": 4, "m": 5, "w": 3}
    try:
        program, machine, result = run(case.text, sizes)
    except (Undefined, TooLong):
        pytest.skip("undefined at these sizes")
    (tmp_path / "f.c").write_text(case.text)
    subprocess.run(["cc", "-shared", "-fPIC", "-O1", "-fwrapv", "-ffp-contract=off", "-w", "-o", tmp_path / "f.so",
                    tmp_path / "f.c"], check=True)
    function = ctypes.CDLL(str(tmp_path / "f.so")).survey
    function.restype = ctypes.c_double
    half, book = 4096, program.book  # bytes on either side: random subscripts may be negative
    types = {("double", 8): ctypes.c_double, ("int", 4): ctypes.c_int, ("unsigned int", 4): ctypes.c_uint}
    objects = machine.objects.values()
    buffers = {obj.name: (ctypes.c_char * (2 * half))() for obj in objects}
    kinds = {obj.name: types.get((obj.kind.name, obj.kind.size)) for obj in objects}
    if None in kinds.values():
        pytest.skip("arrays of another type")
    for obj in objects:
        fresh = Machine(book, sizes)
        again = fresh.outer(obj.name, obj.where, obj.kind)[0]
        for offset in obj:
            kinds[obj.name].from_buffer(buffers[obj.name], half + offset).value = book.real(again[offset])
    integer = ctypes.c_long if "long n" in signature or "size_t n" in signature else ctypes.c_int
    parameters = [name for name, _, held in program.compiled("survey", None).parameters if held == "pointer"]
    pointers = [ctypes.byref(buffers.get(name, (ctypes.c_char * (2 * half))()), half) for name in parameters]
    returned = function(*[integer(sizes[name]) for name in case.sizes if name in sizes], *pointers)
    for obj in objects:
        for offset in dict(obj.writes):
            computed = kinds[obj.name].from_buffer(buffers[obj.name], half + offset).value
            expected = book.real(obj[offset])
            same = computed == expected or (computed != computed and expected != expected)
            assert same, (obj.name, offset, str(case))
    if result is not None:
        assert returned == book.real(result) or returned != returned


def test_branches_on_data_are_both_logged_on_request():
    text = """void mosaic(int n, double *best, const double *ping) {
    for (int i = 0; i < n; i++) {
        if (ping[i] > 1.0e9)
            best[i] = ping[i];
        else
            best[0] = 0.0;
    }
}
"""
    usual = observe(text, "mosaic", 2, {"n": 2})
    assert [x.line for x in usual] == [3, 6, 3, 6]
    assert [x.line for x in observe(text, "mosaic", 2, {"n": 2}, may=True)] == [3, 4, 6, 3, 4, 6]
    assert [x.kind for x in usual] == ["condition", "statement"] * 2


def test_only_pairs_of_one_execution_of_the_nest_count():
    text = """void drift(int steps, int n, double a[n]) {
    for (int t = 0; t < steps; t++)
        for (int i = 0; i < n; i++)
            a[i] = a[i] + t;
}
"""
    assert not verdict_at(text, "drift", 3, "i:2 i", {"steps": 3, "n": 5}).contradicts_legal
    assert not verdict_at(text, "drift", 2, "i t", {"steps": 3, "n": 5}).contradicts_legal

"""The oracle itself: its C against the C compiler, its order against orders counted by hand."""

from __future__ import annotations

import ctypes
import subprocess

import pytest

from oracle import compare, final_tags, observe, parse_terms, times_of, verdict_at
from oracle_run import Program
from oracle_values import Machine, Object, TooLong, plain
from random_nests import seeded_case
from oracle_text import INT, LONG, UCHAR, UINT, ULONG, Undefined, common

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
    assert compare(up, down, "f", {"n": 4}) == ["s+0 gets another value"]
    assert compare(up, down, "f", {"n": 1}) == []
    assert compare(up, held, "f", {"n": 4}) == []
    assert compare(up, held, "f", {"n": 0}) == ["s+0 is written by only one of them", "the variant touches ('s', 0)"]


def test_tags_see_a_missing_and_an_extra_iteration():
    whole = "void f(int n, double *s) { for (int i = 0; i < n; i++) s[i] = i; }"
    short = "void f(int n, double *s) { for (int i = 0; i < n / 2 * 2; i++) s[i] = i; }"
    assert compare(whole, short, "f", {"n": 4}) == []
    assert compare(whole, short, "f", {"n": 5}) == ["s+32 is written by only one of them"]
    assert compare(short, whole, "f", {"n": 5}) == ["s+32 is written by only one of them",
                                                   "the variant touches ('s', 32)"]


def test_undefined_behaviour_is_noticed():
    far = "void f(int n, double a[n][n]) { for (int i = 0; i <= n; i++) a[0][i] = 0; }"
    with pytest.raises(Undefined):
        final_tags(far, "f", {"n": 3})
    outermost = "void f(int n, double a[n][n]) { for (int i = 0; i <= n; i++) a[i][0] = 0; }"
    final_tags(outermost, "f", {"n": 3})  # C11 6.7.6.3, paragraph 7: a parameter's outermost extent is not kept
    overflow = "void f(int n, int *a) { for (int i = 0; i < 3; i++) a[i] = n + i; }"
    with pytest.raises(Undefined):
        final_tags(overflow, "f", {"n": 2147483646})
    unset = "double f(int n) { double x; return x + n; }"
    with pytest.raises(Undefined):
        final_tags(unset, "f", {"n": 3})


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


def start_values(machine, folder_objects):
    """What the cells that were touched held before the run."""
    fresh = Machine(machine.sizes)
    values = {}
    for obj in folder_objects:
        kind = obj.type
        again = Object(obj.name, obj.kind, kind)
        for name, offset in machine.read | machine.written:
            if name == obj.name:
                values[name, offset] = plain(fresh.initial(again, offset, kind))
    return values


@pytest.mark.parametrize("seed", range(900_000, 900_024))
def test_random_nests_compute_as_compiled(seed, tmp_path):
    """The oracle's numbers, not only its tags, are the machine's: random nests with arrays of double or int."""
    case = seeded_case(seed)
    signature = next(line for line in case.text.splitlines() if "survey(" in line)
    if "static" in case.text or "float" in case.text or "struct" in signature:
        pytest.skip("float is computed as double, and static arrays cannot be looked at")
    sizes = {"n": 4, "m": 5, "w": 3}
    try:
        machine = Program(case.text).run("survey", sizes, steps=20_000)
    except (Undefined, TooLong):
        pytest.skip("undefined at these sizes")
    (tmp_path / "f.c").write_text(case.text)
    subprocess.run(["cc", "-shared", "-fPIC", "-O1", "-fwrapv", "-ffp-contract=off", "-w", "-o", tmp_path / "f.so",
                    tmp_path / "f.c"], check=True)
    function = ctypes.CDLL(str(tmp_path / "f.so")).survey
    function.restype = ctypes.c_double
    half = 4096  # bytes on either side: random subscripts may be negative
    buffers = {obj.name: (ctypes.c_char * (2 * half))() for obj in machine.objects}
    kinds = {obj.name: (ctypes.c_double if obj.type.floating else ctypes.c_int) for obj in machine.objects}
    for (name, offset), value in start_values(machine, machine.objects).items():
        kinds[name].from_buffer(buffers[name], half + offset).value = value
    integer = ctypes.c_long if "long n" in signature or "size_t n" in signature else ctypes.c_int
    pointers = [ctypes.byref(buffers[obj.name], half) for obj in machine.objects]
    returned = function(*[integer(sizes[name]) for name in case.sizes], *pointers)
    for obj in machine.objects:
        for name, offset in machine.written:
            if name == obj.name:
                computed = kinds[name].from_buffer(buffers[name], half + offset).value
                expected = plain(obj.cells[offset])
                same = computed == expected or (computed != computed and expected != expected)
                assert same, (name, offset, str(case))
    if machine.result is not None:
        assert returned == plain(machine.result) or returned != returned


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

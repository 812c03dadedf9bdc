"""Verification: right variants pass, and each kind of wrong one is caught and named."""

import shutil
from dataclasses import replace

import pytest
from trial_case import FAST, case, of_file

from retile.model import Assumption, AssumptionCode, Judgement, RetileError, Verdict
from retile.nest.given import with_given
from retile.source import CompilerCall
from retile.trial import Settings, verify_all
from retile.trial.build import Workshop, can_sanitize, strict_flags
from retile.trial.kernel import kernel_of
from retile.trial.layout import Bench
from retile.trial.verification import Verifier

STRICT = Settings()
COPY = """\
void mirror(int n, int m, double to[n][m], double from[m][n]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            to[i][j] = from[j][i];
}
"""
CHUNKED = """\
for (int i_from = 0; i_from < n; i_from += 16)
        for (int j = 0; j < m; j++)
            for (int i = i_from; i < (i_from + 16 < n ? i_from + 16 : n); i++)
                to[i][j] = from[j][i];"""
PLAN = "i:16 j i"


@pytest.fixture
def mirror(tmp_path):
    return case(tmp_path, COPY)


def test_a_right_variant_passes_under_the_sanitizers(mirror):
    found = mirror.accepts(mirror.variant(CHUNKED, PLAN), STRICT)
    assert found.sanitized == can_sanitize(("cc",))
    assert found.difference is None and found.failure is None


def test_sizes_go_round_the_chunk_and_are_unequal(mirror):
    found = mirror.accepts(mirror.variant(CHUNKED, PLAN))
    cases = [dict(sizes) for sizes in found.cases]
    assert {0, 1, 15, 16, 17, 33} <= {sizes["n"] for sizes in cases}
    assert any(sizes["n"] > 16 and sizes["n"] != sizes["m"] for sizes in cases)
    assert any(sizes["n"] % 16 and sizes["n"] > 16 for sizes in cases)


WRONG = {
    "a remainder that is left out": ("i_from < n; i_from += 16", "i_from + 16 <= n; i_from += 16"),
    "a chunk that is one short": ("(i_from + 16 < n ? i_from + 16 : n)", "(i_from + 15 < n ? i_from + 15 : n)"),
    "a loop that runs once too often": ("j < m", "j < m + (n == 17 && j == m)"),
    "a value that is nearly right": ("= from[j][i]", "= from[j][i] * (i == 32 ? 1 + 0x1p-52 : 1)"),
    "a sign of zero": ("= from[j][i]", "= (from[j][i] = from[j][i], i == 16 ? -0.0 * from[j][i] : from[j][i])"),
    "an input that is overwritten": ("= from[j][i];", "= from[j][i], from[j][i] = 0;"),
}


@pytest.mark.parametrize("what", WRONG)
def test_wrong_results_are_found_without_sanitizers(mirror, what):
    old, new = WRONG[what]
    assert old in CHUNKED
    found = mirror.tells_apart(mirror.variant(CHUNKED.replace(old, new), PLAN))
    assert found.difference is not None or "outside" in found.failure


def test_the_first_difference_names_array_place_values_and_sizes(mirror):
    text = CHUNKED.replace("= from[j][i]", "= (i == 2 && j == 1) ? 1234.5 : from[j][i]")
    difference = mirror.tells_apart(mirror.variant(text, PLAN)).difference
    assert (difference.array, difference.index, difference.found) == ("to", (2, 1), 1234.5)
    assert dict(difference.sizes)["n"] >= 3
    assert str(difference).startswith("to[2][1] is 1234.5, the original leaves ")


needs_sanitizers = pytest.mark.skipif(not can_sanitize(("cc",)), reason="this compiler has no sanitizers")


@needs_sanitizers
def test_reads_outside_an_array_are_found(tmp_path):
    one = case(
        tmp_path, "void f(int n, double *z, const double *w) {\n for (int i = 0; i < n; i++)\n  z[i] = w[i];\n}\n"
    )
    text = (
        "double s = 0; for (int i = 0; i <= n; i++) { double v = w[i]; s += v; if (i < n) z[i] = v; "
        "} if (s == 42) z[0] = s;"
    )
    found = one.verify(one.variant(text), STRICT)
    assert not found.verified and "AddressSanitizer" in found.failure and "n = " in found.failure


@needs_sanitizers
def test_signed_overflow_is_found(tmp_path):
    one = case(tmp_path, "void f(int n, double *z) {\n for (int i = 0; i < n; i++)\n  z[i] *= 2;\n}\n")
    text = "int far = 0x7fffffff; for (int i = 0; i < n; i++) { if (far + n < 0) far = 0; z[i] *= 2; }"
    found = one.verify(one.variant(text), STRICT)
    assert not found.verified and "signed integer overflow" in found.failure


def test_writes_beside_an_array_are_found_without_sanitizers(tmp_path):
    one = case(tmp_path, "void f(int n, double *z) {\n for (int i = 0; i < n; i++)\n  z[i] *= 2;\n}\n")
    found = one.verify(one.variant("for (int i = 0; i <= n; i++) z[i] = i < n ? z[i] * 2 : 1;"))
    assert not found.verified and "it writes outside z" in found.failure


def test_a_crash_a_hang_and_bad_c_fail_alone(tmp_path):
    one = case(tmp_path, "void f(int n, double *z) {\n for (int i = 0; i < n; i++)\n  z[i] *= 2;\n}\n")
    texts = [
        "*(volatile int *)0 = 1;",
        "for (volatile int on = 1; on; ) ;",
        "for (;",
        "undeclared_function(z);",
        one.text,
    ]
    found = verify_all(one.source, one.nest, [one.variant(text) for text in texts], replace(FAST, limit=2))
    assert [result.verified for result in found] == [False, False, False, False, True]
    assert "SIGSEGV" in found[0].failure
    assert "time limit" in found[1].failure
    assert "survey.c:2" in found[2].failure
    assert "undeclared_function" in found[3].failure
    assert len(found[4].cases) >= 5


def test_an_original_that_stops_is_no_witness(tmp_path):
    """Dividing by n - 7 is undefined for n = 7; the other sizes still count."""
    one = case(tmp_path, "void f(int n, int *z) {\n for (int i = 0; i < n; i++)\n  z[i] = z[i] / (n - 7);\n}\n")
    found = one.accepts(one.variant(one.text), STRICT)
    assert len(found.cases) > 3 and all(dict(sizes)["n"] != 7 for sizes in found.cases)
    assert any("the original itself stops" in note for note in found.notes)


def test_an_output_that_never_changes_proves_little_and_is_said(tmp_path):
    one = case(
        tmp_path, "void f(int n, double *z) {\n for (int i = 0; i < n; i++)\n  if (z[i] > 1e30)\n   z[i] = 0;\n}\n"
    )
    found = one.verify(one.variant(one.text))
    assert any("no output changes" in note for note in found.notes)


def test_fill_as_asked(tmp_path):
    one = case(
        tmp_path,
        "void f(int n, double *z, const double *w) {\n for (int i = 0; i < n; i++)\n  z[i] += w[i] * w[i];\n}\n",
    )
    wrong = one.replaced("w[i] * w[i]", "w[i]")
    assert one.verify(wrong, replace(FAST, fills=(("w", "zero"),))).verified
    one.tells_apart(wrong)
    with pytest.raises(RetileError, match="nothing named q"):
        one.verify(wrong, replace(FAST, fills=(("q", "zero"),)))
    with pytest.raises(RetileError, match="ways of filling"):
        one.verify(wrong, replace(FAST, fills=(("w", "sideways"),)))


def test_a_factorization_is_given_a_matrix_that_it_can_factor(tmp_path):
    """Golub & Van Loan, "Matrix Computations", 4th ed., section 4.1 (from memory).

    Elimination without pivoting of a diagonally dominant matrix has bounded growth; a random one may meet a pivot near
    zero, and the square root of a negative number is no number.
    """
    one = of_file("samples_c/tidal_factor.c", skip=4)
    found = one.accepts(one.variant(one.text))
    assert found.fill == "diagonal-dominant"


def test_tables_of_indices_hold_indices_in_range(tmp_path):
    one = of_file("samples_c/swath_mosaic.c", skip=2)
    one.accepts(one.variant(one.text), STRICT)
    one.tells_apart(one.replaced("mosaic[cell[r * cols + c]]", "mosaic[cell[r * cols + c] / 2]"))
    wide = case(
        tmp_path,
        "double table[6];\nvoid f(int n, double *z, const unsigned char *at) {\n"
        " for (int i = 0; i < n; i++)\n  z[i] = table[at[i] + 1];\n}\n",
    )
    wide.accepts(wide.variant(wide.text), STRICT)


def test_arrays_must_be_left_as_they_are_where_only_one_side_writes(tmp_path):
    one = case(
        tmp_path, "void f(int n, double *z, int *seen) {\n for (int i = 0; i < n; i++)\n  z[i] += seen[i];\n}\n"
    )
    found = one.tells_apart(one.replaced("seen[i]", "seen[i]++"))
    assert found.difference.array == "seen"


def test_iterators_that_nobody_reads_afterwards_may_end_anywhere(tmp_path):
    text = (
        "void f(int n, double *z) {\n int i, j;\n for (i = 0; i < n; i++)\n  for (j = 0; j < n; j++)\n"
        "   z[i * n + j] *= 2;\n}\n"
    )
    one = case(tmp_path, text)
    one.accepts(one.variant("for (j = 0; j < n; j++) for (i = 0; i < n; i++) z[i * n + j] *= 2; i = 77;"))


def _assuming(variant, *assumptions):
    return replace(variant, judgement=Judgement(Verdict.LEGAL, variant.plan, assumptions=assumptions))


def test_variants_must_notice_pointers_that_overlap(tmp_path):
    one = case(
        tmp_path,
        "void f(int n, double *z, const double *w) {\n for (int i = 0; i < n; i++)\n  z[i] = w[i] + 1;\n}\n",
    )
    down = "for (int i = n - 1; i >= 0; i--) z[i] = w[i] + 1;"
    apart = Assumption(AssumptionCode.NO_OVERLAP, "z and w do not overlap", None, ("w", "z"))
    careless = _assuming(one.variant(down), apart)
    assert one.verify(one.variant(down)).verified
    found = one.verify(careless)
    assert not found.verified and found.difference is not None
    assert one.verify(careless, replace(FAST, trust=True)).verified
    careful = one.variant(f"if (z + n <= w || w + n <= z) {{ {down} }} else {{ {one.text} }}")
    assert one.verify(_assuming(careful, apart)).verified


def test_strict_flags_take_away_what_relaxes_arithmetic():
    assert strict_flags(["-O3", "-march=native", "-ffast-math", "-fno-math-errno"], False) == [
        "-march=native",
        "-fno-math-errno",
        "-O1",
        "-ffp-contract=off",
    ]


def test_a_missing_compiler_is_said(mirror):
    with pytest.raises(RetileError, match="no-such-cc"):
        mirror.verify(mirror.variant(CHUNKED), replace(FAST, cc="no-such-cc"))


def test_fixed_sizes_that_take_long_are_verified_once(tmp_path, monkeypatch):
    monkeypatch.setattr("retile.trial.sizes._WORK_OF_ONE", 1000)
    one = case(
        tmp_path,
        "float z[30][90];\nvoid f(void) {\n for (int j = 0; j < 90; j++)\n  for (int i = 0; i < 30; i++)\n"
        "   z[i][j] *= 2;\n}\n",
    )
    assert len(one.accepts(one.variant(one.text)).cases) == 1


def test_rows_also_lie_apart(tmp_path):
    one = of_file("samples_c/tidal_factor.c", skip=0)
    cases = [dict(sizes) for sizes in one.accepts(one.variant(one.text)).cases]
    assert any(sizes["ld"] > sizes["n"] > 0 for sizes in cases)


def test_without_sanitizers_it_is_said(mirror, monkeypatch):
    monkeypatch.setattr("retile.trial.verification.can_sanitize", lambda command: False)
    found = mirror.accepts(mirror.variant(CHUNKED, PLAN), STRICT)
    assert not found.sanitized and any("no sanitizers" in note for note in found.notes)


@pytest.mark.skipif(shutil.which("clang") is None, reason="there is no clang here")
def test_another_compiler(mirror):
    clang = replace(STRICT, cc="clang")
    mirror.accepts(mirror.variant(CHUNKED, PLAN), clang)
    mirror.tells_apart(mirror.variant(CHUNKED.replace("? i_from + 16", "? i_from + 15"), PLAN), clang)


def test_a_compiler_with_arguments_in_a_directory_of_its_own(tmp_path):
    (tmp_path / "deep").mkdir()
    (tmp_path / "deep" / "scale.h").write_text("#define SCALE 3\n")
    call = CompilerCall("cc -DTWO=2", ("-Ideep", "-O3", "-ffast-math"), str(tmp_path))
    one = case(
        tmp_path,
        "#include <scale.h>\nvoid f(int n, double *z) {\n for (int i = 0; i < n; i++)\n"
        "  z[i] = z[i] * SCALE + TWO;\n}\n",
        call,
    )
    one.tells_apart(one.replaced("SCALE", "TWO"))


def test_rows_that_the_nest_points_into_itself_have_memory(tmp_path):
    smooth = case(tmp_path, "void smooth(double *img, const double *src, int h, int w)\n{\n"
                            "    for (int i = 1; i < h - 1; i++) {\n        double *row = img + i * w;\n"
                            "        const double *up = src + (i - 1) * w, *mid = src + i * w;\n"
                            "        for (int j = 1; j < w - 1; j++)\n            row[j] = up[j] + mid[j - 1];\n    }\n}\n")
    smooth.accepts(smooth.variant(smooth.text))
    smooth.tells_apart(smooth.replaced("mid[j - 1]", "mid[j]"))


def test_a_single_cell_behind_a_pointer(tmp_path):
    found = case(
        tmp_path,
        "void count(int n, int m, long *hits, double *sum, double d[n][m]) {\n    for (int i = 0; i < n; i++)\n"
        "        for (int j = 0; j < m; j++) {\n            *hits += d[i][j] > 0;\n            sum[0] += d[i][j];\n"
        "        }\n}\n",
    )
    assert any(dict(sizes)["n"] > 2 for sizes in found.accepts(found.variant(found.text)).cases)
    assert found.tells_apart(found.replaced("> 0", "> 0.5")).difference.array == "hits"


def test_sizes_without_work_prove_nothing(tmp_path):
    """Where only empty loops can be run, nothing was verified."""
    text = "void f(int n, int to[4], int from[4]) {\n    for (int i = 0; i < n; i++)\n        to[i] = from[i];\n}\n"
    found = case(tmp_path, text)
    bench = Bench(kernel_of(found.source, found.nest))

    def only_empty(sizes):
        if sizes["n"] > 0:
            raise RetileError("no room")
        return Bench.layout(bench, sizes)

    bench.layout = only_empty
    verifier = Verifier(bench, Workshop(tmp_path, found.source.call, str(tmp_path)), FAST)
    with pytest.raises(RetileError, match="nothing to verify at: no room"):
        verifier.cases([found.variant(found.text)])


def test_facts_about_rows_behind_rows_go_by_the_names_of_the_tables(tmp_path):
    """``from`` and the rows of ``to``, and the rows of both: the two names settle either."""
    text = "void f(int n, int m, double **to, double *const *from) {\n    for (int j = 0; j < m; j++)\n"
    text += "        for (int i = 0; i < n; i++)\n            to[i][j] = from[i][j];\n}\n"
    found = case(tmp_path, text)
    assert not any(a.given for a in found.nest.assumptions)
    assert all(a.given for a in with_given(found.nest, distinct=["from,to", "to"]).assumptions)
    part = with_given(found.nest, distinct=["to"]).assumptions
    assert [a.storages for a in part if a.given] == [("to[]",)]
    found.accepts(found.variant(found.text))

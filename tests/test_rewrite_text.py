"""What a variant looks like: the nest in the user's own style, everything else byte for byte."""

from __future__ import annotations

import subprocess
from pathlib import Path

import pytest
from rewriting import Case, case_of, compile_and_run, rewritten

from retile.affine import Affine
from retile.dependence import analyse
from retile.plan import judge, parse_plan
from retile.rewrite import InternalError, rewrite
from retile.tree import Loop

SUM = """void survey(int n, double c[restrict n][n], double a[restrict n][n], double b[restrict n][n])
{
    for (int i = 0; i < n; i++) {
        for (int j = 0; j < n; j++) {
            for (int k = 0; k < n; k++) {
                c[i][j] += a[i][k] * b[k][j];
            }
        }
    }
}
"""


def test_a_chunk_loop_reads_as_a_colleague_would_write_it(tmp_path: Path) -> None:
    assert rewritten(tmp_path, SUM, "k:64 i k j") == """\
for (long long k_from = 0; k_from < n; k_from += 64) {
    const int k_to = k_from + 64 < n ? (int)k_from + 64 : n;
    for (int i = 0; i < n; i++) {
        for (int k = (int)k_from; k < k_to; k++) {
            for (int j = 0; j < n; j++) {
                c[i][j] += a[i][k] * b[k][j];
            }
        }
    }
}"""


def test_full_chunks_stand_apart(tmp_path: Path) -> None:
    assert rewritten(tmp_path, SUM, "j:8 i j k", remainder="peel") == """\
for (long long j_from = 0; j_from < n; j_from += 8) {
    const int j_to = j_from + 8 < n ? (int)j_from + 8 : n;
    if (j_from + 8 <= n) {
        for (int i = 0; i < n; i++) {
            for (int j = (int)j_from; j < (int)j_from + 8; j++) {
                for (int k = 0; k < n; k++) {
                    c[i][j] += a[i][k] * b[k][j];
                }
            }
        }
    } else {
        for (int i = 0; i < n; i++) {
            for (int j = (int)j_from; j < j_to; j++) {
                for (int k = 0; k < n; k++) {
                    c[i][j] += a[i][k] * b[k][j];
                }
            }
        }
    }
}"""


def test_outer_levels_carry_their_size(tmp_path: Path) -> None:
    text = rewritten(tmp_path, SUM, "i:96 i:6 i j k")
    assert "for (long long i_from_96 = 0; i_from_96 < n; i_from_96 += 96) {" in text
    assert "for (long long i_from = i_from_96; i_from < i_to_96; i_from += 6) {" in text


def test_names_keep_out_of_the_way_of_the_users(tmp_path: Path) -> None:
    text = rewritten(tmp_path, SUM.replace("void survey", "int k_from, k_to_;\nvoid survey"), "k:64 i k j")
    assert "for (long long k_from_ = 0; k_from_ < n; k_from_ += 64) {" in text
    assert "const int k_to = k_from_ + 64 < n" in text


def test_the_original_order_gives_the_file_back(tmp_path: Path) -> None:
    case = case_of(tmp_path, SUM)
    variant = case.variant("i j k")
    assert (variant.text, variant.includes, case.diff(variant)) == (SUM, (), "")


def test_bounds_without_a_wider_type_are_reached_without_wrapping(tmp_path: Path) -> None:
    text = rewritten(tmp_path, "#include <stddef.h>\n" + SUM.replace("int ", "size_t "), "k:64 i k j")
    assert text.startswith("""\
for (size_t k_from = 0, k_to; k_from < n; k_from = k_to) {
    k_to = n - k_from > 64 ? k_from + 64 : n;
""")


def test_counting_down_keeps_its_idiom(tmp_path: Path) -> None:
    text = """void survey(unsigned n, unsigned m, double a[n][m])
{
\tfor (unsigned i = n; i-- > 0; )
\t\tfor (unsigned j = m; j-- > 0; )
\t\t\ta[i][j] /= 2;
}
"""
    assert rewritten(tmp_path, text, "j:64 i j") == """\
for (unsigned j_from = m, j_to; j_from > 0; j_from = j_to) {
\tj_to = j_from > 64 ? j_from - 64 : 0;
\tfor (unsigned i = n; i-- > 0; )
\t\tfor (unsigned j = j_from; j-- > j_to; )
\t\t\ta[i][j] /= 2;
}"""


def test_the_users_layout_is_kept(tmp_path: Path) -> None:
    """Braces on lines of their own and indented, blanks inside parentheses, names of constants."""
    text = """#define ROWS 100
static double a[ROWS][ROWS];
void
survey (int n)
{
  int i, j;
  for ( i = 0; i < n; i += 1 )
    {
      for ( j = 0; j < ROWS; ++j )
        {
          a[i][j] += 1;
        }
    }
}
"""
    assert rewritten(tmp_path, text, "j:8 i j") == """\
for ( int j_from = 0; j_from < ROWS; j_from += 8)
  {
    const int j_to = j_from + 8 < ROWS ? j_from + 8 : ROWS;
    for ( i = 0; i < n; i += 1 )
      {
        for ( j = j_from; j < j_to; ++j )
          {
            a[i][j] += 1;
          }
      }
  }"""


COMMENTED = """void survey(int n, double a[n][n]) {
    for (int i = 0; i < n; i++) { // rows
        /* columns,
           from the left */
        for (int j = 0; j < n; j++) {
            // one cell
            a[i][j] += 1; /* metres */

            // and that is it
        } // end of the row
    } /* end */
}
"""


def test_no_comment_is_lost_and_none_doubled(tmp_path: Path) -> None:
    text = rewritten(tmp_path, COMMENTED, "j:8 i j")
    for comment in ("// rows", "/* columns,", "from the left */", "// one cell", "/* metres */", "// and that is it",
                    "// end of the row"):
        assert text.count(comment) == 1, (comment, text)
    assert "for (int i = 0; i < n; i++) { // rows\n" in text


def test_comments_of_headers_that_stay_byte_for_byte_stay_in_them(tmp_path: Path) -> None:
    text = SUM.replace("i < n;", "i < n /* beams */;")
    assert "for (int i = 0; i < n /* beams */; i++) {" in rewritten(tmp_path, text, "k j i")
    assert rewritten(tmp_path, text, "i:8 k j i").count("/* beams */") == 1


def test_the_body_moves_by_whole_lines(tmp_path: Path) -> None:
    """A string that runs over a line end keeps its bytes, and a comment that cannot move whole stays where it is."""
    text = """void survey(int n, double a[n][n]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            /* a table:
             *   drawn
        to the left */
            a[i][j] += sizeof "left \\
edge";

            a[i][j] *=
                2;
        }
}
"""
    case = case_of(tmp_path, text)
    moved = case.variant("i:4 j:8 i j").nest_text
    assert """\
                    /* a table:
             *   drawn
        to the left */
                    a[i][j] += sizeof "left \\
edge";

                    a[i][j] *=
                        2;
""" in moved


def test_carriage_returns_are_kept(tmp_path: Path) -> None:
    text = COMMENTED.replace("\n", "\r\n")
    variant = case_of(tmp_path, text).variant("j:8 i j")
    assert variant.text.count("\n") == variant.text.count("\r\n")


def test_a_nest_that_is_a_branch_gets_a_block(tmp_path: Path) -> None:
    text = """void survey(int n, int m, double a[n][n]) {
    int i, j;
    if (m)
        for (i = 0; i < n; i++)
            for (j = 0; j < n; j++)
                a[i][j] += 1;
    else
        a[0][0] = i = 0;
    a[0][0] += i;
}
"""
    moved = case_of(tmp_path, text).variant("j i").text
    assert "if (m)\n        /* Loops" in moved and "\n        {\n" in moved and "\n        }\n    else\n" in moved


# ---------------------------------------------------------------- the file


def test_headers_go_behind_the_last_include_outside_conditionals(tmp_path: Path) -> None:
    text = """/* survey.c */
#include <stddef.h>
#ifdef DEEP
#include <string.h>
#endif
""" + SUM.replace("restrict ", "")
    variant = case_of(tmp_path, text).variant("k:64 i k j")
    assert variant.includes == ("<stdint.h>",)
    assert "#include <stddef.h>\n#include <stdint.h>\n#ifdef DEEP\n" in variant.text


@pytest.mark.parametrize(("head", "expected"), [
    ("/* a file */\n\n", "/* a file */\n#include <stdint.h>\n\n"),
    ("", "#include <stdint.h>\n"),
    ("/* about the function */\n", "#include <stdint.h>\n/* about the function */\n"),
    ("#include <stdint.h>\n", "#include <stdint.h>\n"),
])
def test_headers_of_a_file_without_includes_go_to_the_top(head: str, expected: str, tmp_path: Path) -> None:
    text = case_of(tmp_path, head + SUM.replace("restrict ", "")).variant("k:64 i k j").text
    assert text.startswith(expected + "void survey")


def test_the_remark_says_how_to_make_the_variant_again(tmp_path: Path) -> None:
    text = case_of(tmp_path, SUM).variant("k:64 i k j", remainder="peel").nest_text
    assert text.startswith("/* Loops reordered by retile: k:64 i k j; remainder peel\n")
    assert "Made by: retile rewrite survey.c:3 'k:64 i k j; remainder peel' */" in text


def test_the_remark_is_written_like_the_files_own(tmp_path: Path) -> None:
    text = case_of(tmp_path, "// one\n// two\n" + SUM).variant("k:64 i k j").nest_text
    assert text.startswith("// Loops reordered by retile: k:64 i k j\n    // Made by: ")


# ---------------------------------------------------------------- patches


@pytest.mark.parametrize("change", [
    lambda text: text,
    lambda text: text.replace("\n", "\r\n"),
    lambda text: text.rstrip("\n"),
    lambda text: text[:text.rindex("}")] + "} /* no line end */",
    lambda text: "/* \f form feed */\n" + text,
], ids=["plain", "crlf", "no last line end", "comment at the end", "form feed"])
@pytest.mark.parametrize("tool", [["git", "apply"], ["patch", "-p1", "--binary"]], ids=["git", "patch"])
def test_patches_apply(tool: list[str], change, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    if tool[0] == "git":
        subprocess.run(["git", "init", "-q"], check=True)
    folder = tmp_path / "deep"
    folder.mkdir()
    case = case_of(folder, change(SUM.replace("restrict ", "")))
    variant = case.variant("k:64 i k j")
    (tmp_path / "change.patch").write_bytes(case.diff(variant).encode())
    done = subprocess.run([*tool, *(["-i"] if tool[0] == "patch" else []), "change.patch"], check=False, capture_output=True, text=True)
    assert done.returncode == 0, done.stdout + done.stderr
    assert (folder / "survey.c").read_bytes() == variant.text.encode()


# ---------------------------------------------------------------- nothing wrong gets out


def _broken(tree: tuple, change) -> tuple:
    """The tree with every loop changed."""
    return tuple(change(node) if isinstance(node, Loop) else node for node in tree)


@pytest.mark.parametrize("change", [
    lambda loop: Loop(**{**vars(loop), "lower": Affine((), 1)}),
    lambda loop: Loop(**{**vars(loop), "upper": loop.upper + 1}),
    lambda loop: Loop(**{**vars(loop), "step": -loop.step}),
], ids=["an iteration lost", "an iteration too many", "order turned round"])
def test_a_wrong_tree_is_a_defect_and_gives_no_text(change, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    import retile.plan

    case: Case = case_of(tmp_path, SUM)
    build = retile.plan.build_tree
    dependences = analyse(case.nest)
    judgement = judge(case.nest, dependences, parse_plan("k j i", case.nest))
    monkeypatch.setattr(retile.plan, "build_tree", lambda nest, plan: _broken(build(nest, plan), change))
    with pytest.raises(InternalError, match="nothing was written"):
        rewrite(case.source, case.nest, dependences, judgement.plan, judgement)


# ---------------------------------------------------------------- the C of 1990

OLD = """void survey(T n, T m, double *a)
{
    T i, j;
    for (i = 0; i < n; i++)
        for (j = 0; j < m; j++)
            a[i * m + j] = a[i * m + j] + 1;
}
"""


@pytest.mark.parametrize("type", ["int", "unsigned long"])
@pytest.mark.parametrize("plan", ["i:4 j:8 i j", "(i+j):8 i j", "j i"])
def test_the_c_of_1990_declares_nothing_in_headers(type: str, plan: str, tmp_path: Path) -> None:
    case = case_of(tmp_path, OLD.replace("T", type), flags=("-std=c89",))
    text = case.variant(plan, trust=True, remainder="peel").text
    compile_and_run(tmp_path, text + "int main(void) { return 0; }\n", flags=(),
                    warnings=("-std=c89", "-Wall", "-Wextra", "-Werror", "-Wdeclaration-after-statement"))

"""Variables that are declared inside the nest: every variant has them where all of their uses see them."""

from __future__ import annotations

from pathlib import Path

import pytest
from rewriting import case_of, compile_and_run, rewritten, together

from retile.dependence import analyse
from retile.model import Verdict
from retile.plan import judge, parse_plan

MAIN = """
enum { N = 20 };
static double a[2][N * N], b[2][N * N];
static void fill(int which) {
    for (int at = 0; at < N * N; at++) {
        a[which][at] = (double)(at % 13) * 0.37 + 0.1;
        b[which][at] = (double)(at % 7) - 2.5;
    }
}
typedef void survey_function(int n, int m, double a[n][m], double b[n][m]);
int main(void) {
    static survey_function *const variants[] = { VARIANTS };
    for (size_t v = 0; v < sizeof variants / sizeof *variants; v++)
        for (int n = 0; n < 10; n++)
            for (int m = 1; m < 10; m++) {
                fill(0);
                fill(1);
                original(n, m, (double (*)[m])a[0], (double (*)[m])b[0]);
                variants[v](n, m, (double (*)[m])a[1], (double (*)[m])b[1]);
                if (memcmp(a[0], a[1], sizeof a[0]) || memcmp(b[0], b[1], sizeof b[0])) {
                    printf("variant %d differs at %d, %d\\n", (int)v, n, m);
                    return 1;
                }
            }
    return 0;
}
"""

HEAD = "void survey(int n, int m, double a[n][m], double b[n][m]) {\n"
SQUARES = HEAD + """    for (int i = 0; i < n; i++) {
        double t;
        for (int j = 0; j < m; j++) {
            t = a[i][j];
            b[i][j] = t * t;
        }
    }
}
"""
ROWS = HEAD + """    for (int i = 0; i < n; i++) {
        double t; /* half of a depth */
        int j, k;
        double sum;
        b[i][0] = 0.0;
        for (j = 1; j < m; j++) {
            t = a[i][j] * 0.5;
            b[i][j] = t * t + b[i][j - 1];
        }
        sum = 0.0;
        for (k = 0; k < m; k++)
            sum += a[i][k];
        a[i][0] = sum;
    }
}
"""
PAIR = HEAD + """    for (int i = 0; i < n; i++) {
        double pair[2];
        for (int j = 0; j < m; j++) {
            pair[0] = a[i][j];
            pair[1] = b[i][j] * 2.0;
            b[i][j] = pair[0] * pair[1];
        }
    }
}
"""
POINTERS = HEAD + """    for (int i = 0; i < n; i++) {
        const double *from = a[i];
        double *to = b[i], last;
        for (int j = 0; j < m; j++) {
            last = from[j];
            to[j] += last * last;
        }
    }
}
"""
LEVELS = HEAD + """    for (int i = 0; i < n - 1; i++) {
        int now = i % 2, next = 1 - now;
        for (int j = 1; j < m - 1; j++)
            a[next][j] = 0.5 * (a[now][j - 1] + a[now][j + 1]);
    }
    (void)b;
}
"""
CASES = {
    "one scalar": (SQUARES, ["i:4 i j", "j i", "j:4 i j", "i:3 j:2 j i", "(i+j):3 i j"]),
    "several": (ROWS, ["i:4 i j k", "j:4 i j k", "i:4 j:3 i j", "i k:4 j k", "i:4 k:3 i j k", "j i", "i:4 j:2 k:3 i j k"]),
    "values computed again": (LEVELS, ["(i+j):3 i j", "i:4 (i+j):3 i j"]),
    "an array": (PAIR, ["i:4 i j", "i j:3 j"]),
    "pointers": (POINTERS, ["i:4 i j", "i:4 j:3 i j", "j i"]),
}


@pytest.mark.parametrize("name", CASES)
@pytest.mark.parametrize("remainder", ["clamp", "peel"])
def test_variants_compile_and_agree(tmp_path: Path, name: str, remainder: str) -> None:
    text, plans = CASES[name]
    case = case_of(tmp_path, text)
    variants = [case.variant(plan, trust=False, remainder=remainder).text for plan in plans]
    main = MAIN.replace("VARIANTS", ", ".join(f"variant{at}" for at in range(len(variants))))
    compile_and_run(tmp_path, together(text, variants, main))


def test_a_declaration_stays_in_its_block(tmp_path: Path) -> None:
    assert rewritten(tmp_path, SQUARES, "i:4 i j") == """\
for (long long i_from = 0; i_from < n; i_from += 4) {
    const int i_to = i_from + 4 < n ? (int)i_from + 4 : n;
    for (int i = (int)i_from; i < i_to; i++) {
        double t;
        for (int j = 0; j < m; j++) {
            t = a[i][j];
            b[i][j] = t * t;
        }
    }
}"""


def test_a_declaration_moves_to_where_all_uses_see_it(tmp_path: Path) -> None:
    assert rewritten(tmp_path, ROWS, "j:4 i j k", trust=True) == """\
{
    double t; /* half of a depth */
    int j, k;
    double sum;
    for (int i = 0; i < n; i++) {
        b[i][0] = 0.0;
    }
    for (long long j_from = 1; j_from < m; j_from += 4) {
        const int j_to = j_from + 4 < m ? (int)j_from + 4 : m;
        for (int i = 0; i < n; i++) {
            for (j = (int)j_from; j < j_to; j++) {
                t = a[i][j] * 0.5;
                b[i][j] = t * t + b[i][j - 1];
            }
        }
    }
    for (int i = 0; i < n; i++) {
        sum = 0.0;
        for (k = 0; k < m; k++)
            sum += a[i][k];
        a[i][0] = sum;
    }
}"""


@pytest.mark.parametrize(("text", "plan", "verdict"), [
    # a value given where the variable is declared does not reach into other loops
    (SQUARES.replace("double t;", "double t = 1.0;").replace("t = a[i][j];", "t = t + a[i][j];"), "i j", Verdict.LEGAL),
    (SQUARES.replace("double t;", "double t = 1.0;").replace("t = a[i][j];", "t = t + a[i][j];"), "j i", Verdict.ILLEGAL),
    # the cells of an array of one iteration are used again by the next
    (PAIR, "j i", Verdict.ILLEGAL),
])
def test_verdicts(tmp_path: Path, text: str, plan: str, verdict: Verdict) -> None:
    case = case_of(tmp_path, text)
    assert judge(case.nest, analyse(case.nest), parse_plan(plan, case.nest)).verdict is verdict

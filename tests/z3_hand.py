"""Nests written by hand for the questions to z3: the forms that random nests seldom hit, each with its own difficulty.

Every text is a whole C file whose nest starts on the line given; all data and names belong to an invented seabed survey.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class HandNest:
    """A file and the line of its nest."""

    text: str
    line: int = 2


def _nest(parameters: str, body: str, line: int = 2) -> HandNest:
    return HandNest(f"void survey({parameters}) {{\n{body.strip(chr(10))}\n}}\n", line)


GUARDED = {
    "beside the diagonal": _nest("int n, double z[n][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            if (i != j)
                z[i][j] = z[j][j] + 1.0;"""),
    "below an antidiagonal": _nest("int n, double z[n + 1][n + 1]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            if (i + j < n)
                z[i][j] = z[j][i + 1];"""),
    "even columns right of the diagonal": _nest("int n, int m, double z[n + m]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            if (j % 2 == 0 && j > i)
                z[j] = z[i + 1] * 0.5;"""),
    "one of two corners": _nest("int n, int m, double z[n + 2][m + 2]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            if (i > 3 || j < 2)
                z[i][j + 1] = z[i + 1][j];"""),
    "either way": _nest("int n, double z[n + 2], double y[n + 2]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            if (j <= i)
                z[j] = y[i + 1];
            else
                y[i] = z[j + 1];"""),
    "where the depth says so": _nest("int n, int m, double z[n + 1][m + 1]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            if (z[i][j] > 0.5)
                z[i + 1][j] = 0.0;"""),
    "a guard between the loops": _nest("int n, int m, double z[n][m], double edge[n]", """
    for (int i = 0; i < n; i++)
        if (i % 3 != 1)
            for (int j = 1; j < m; j++)
                z[i][j] = z[i][j - 1] + edge[i];"""),
    "not in the middle third": _nest("int n, double z[3 * n + 3]", """
    for (int i = 0; i < 3 * n; i++)
        for (int j = 0; j < 3; j++)
            if (!(i >= n && i < 2 * n))
                z[i + j] = z[i] + 1.0;"""),
}

STRIDED = {
    "every second line": _nest("int n, int m, double z[n + 2][m + 2]", """
    for (int i = 0; i < n; i += 2)
        for (int j = 0; j < m; j++)
            z[i][j] = z[i + 1][j + 1];"""),
    "strides that meet every sixth cell": _nest("int n, int m, double z[n + m]", """
    for (int i = 0; i < n; i += 2)
        for (int j = 0; j < m; j += 3)
            z[i] = z[j] + 1.0;"""),
    "colours of a chessboard": _nest("int n, int m, double z[n + 2][m + 2]", """
    for (int i = 1; i <= n; i++)
        for (int j = 1 + i % 2; j <= m; j += 2)
            z[i][j] = z[i - 1][j] + z[i + 1][j] + z[i][j - 1] + z[i][j + 1];"""),
    "colours that touch": _nest("int n, int m, double z[n + 2][m + 3]", """
    for (int i = 1; i <= n; i++)
        for (int j = 1 + i % 2; j <= m; j += 2)
            z[i][j] = z[i - 1][j + 1] + z[i][j + 2];"""),
    "from the end": _nest("int n, int m, double z[n + 1][m + 1]", """
    for (int i = n - 1; i >= 0; i--)
        for (int j = m; j > 0; j--)
            z[i][j] = z[i + 1][j - 1];"""),
    "down by two from a moving start": _nest("int n, double z[n + 1][n + 1]", """
    for (int i = 0; i < n; i++)
        for (int j = i; j >= 0; j -= 2)
            z[i][j] = z[j][i] + z[i + 1][j];"""),
    "up by two from a moving start": _nest("int n, double z[n + 3][n + 3]", """
    for (int i = 0; i < n; i++)
        for (int j = i; j < n; j += 2)
            z[i][j] = z[i + 1][j + 1] + z[i + 2][j];"""),
    "up to, by inequality": _nest("int n, int m, double z[n + 1][m + 2]", """
    for (int i = 0; i != n; i++)
        for (int j = 0; j < m; j++)
            z[i][j] = z[i + 1][j + 2];"""),
    "three steps down": _nest("int n, double z[n + 4]", """
    for (int i = n; i > 0; i -= 3)
        for (int j = 0; j < 4; j++)
            z[i + j - 1] = z[i] * 0.5;"""),
}

BOUNDED = {
    "a triangle against its mirror": _nest("int n, double z[n][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j <= i; j++)
            z[i][j] = z[j][i];"""),
    "a shrinking trapezoid": _nest("int n, int steps, double z[n + 1]", """
    for (int t = 0; t < steps; t++)
        for (int i = t + 1; i < n - t; i++)
            z[i] = z[i - 1] + z[i + 1];"""),
    "a band": _nest("int n, int w, double z[n][n]", """
    for (int i = 0; i < n; i++)
        for (int j = (i > w ? i - w : 0); j < (i + w < n ? i + w : n); j++)
            z[i][j] = z[j][i] * 0.5;"""),
    "halves of a range": _nest("int n, double z[2 * n + 2]", """
    for (int i = 0; i < n; i++)
        for (int j = i / 2; j < (n + i) / 2; j++)
            z[j] = z[i + j] + 1.0;"""),
    "upper halves": _nest("int n, int m, double z[n + m]", """
    for (int i = 0; i < n / 2; i++)
        for (int j = n / 2; j < n; j++)
            z[i] = z[j] + 1.0;"""),
    "a pyramid": _nest("int n, double z[n + 2][n + 2]", """
    for (int k = 0; k < n; k++)
        for (int i = k; i < n - k; i++)
            for (int j = k; j <= i; j++)
                z[i][j] = z[i + 1][j] + z[k][j];"""),
    "a wedge of sums": _nest("int n, double z[2 * n + 2]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n - i; j++)
            z[i + j] = z[i] + z[j];"""),
    "the smaller of two sizes": _nest("int n, int m, double z[n + m][n + m]", """
    for (int i = 0; i < (n < m ? n : m); i++)
        for (int j = i; j < m; j++)
            z[i][j] = z[j][i];"""),
    "a remainder as a bound": _nest("int n, double z[n + 6]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < i % 4; j++)
            z[i + j] = z[i + 1];"""),
    "inside an outer loop": _nest("int n, int steps, double z[n + 2][n + 2]", """
    for (int t = 0; t < steps; t++)
        for (int i = t; i < n; i++)
            for (int j = 0; j <= t; j++)
                z[i][j] = z[i + 1][t] + z[t][j];""", line=3),
}

SUBSCRIPTS = {
    "halved subscripts": _nest("int n, int m, double z[n + m]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            z[i / 2 + j] = z[j / 2] + 1.0;"""),
    "four cells in turn": _nest("int n, int m, double z[4]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            z[(i + j) % 4] = z[i % 4] * 0.5;"""),
    "two levels in turn": _nest("int n, int steps, double z[2][n + 2]", """
    for (int t = 0; t < steps; t++)
        for (int i = 1; i <= n; i++)
            z[(t + 1) % 2][i] = z[t % 2][i - 1] + z[t % 2][i + 1];"""),
    "three levels in turn": _nest("int n, int steps, double z[3][n + 2]", """
    for (int t = 0; t < steps; t++)
        for (int i = 1; i <= n; i++)
            z[(t + 2) % 3][i] = z[(t + 1) % 3][i - 1] - z[t % 3][i];"""),
    "skew factors": _nest("int n, double *z", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            z[2 * i + 3 * j] = z[3 * i + 2 * j] + 1.0;"""),
    "turned round": _nest("int n, double z[n + 1]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < 2; j++)
            z[i + j] = z[n - i - j];"""),
    "a size away": _nest("int n, int m, double *z", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            z[i + m] = z[i + j];"""),
    "members of soundings": HandNest("""struct sounding { double low; double high; };
void survey(int n, int m, struct sounding z[n + 1][m + 1]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            z[i][j].low = z[i + 1][j].high + z[i][j + 1].low;
}
""", 3),
    "diagonals": _nest("int n, double z[2 * n + 1][2 * n + 1]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            z[i + j][j] = z[i + j + 1][i];"""),
    "odd from even": _nest("int n, int m, double *z", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            z[2 * i + 4 * j + 1] = z[2 * j] + z[2 * i + 1];"""),
}

SEVERAL = {
    "wave front": _nest("int n, int m, double z[n + 2][m + 2]", """
    for (int i = 1; i <= n; i++)
        for (int j = 1; j <= m; j++)
            z[i][j] = z[i - 1][j] + z[i][j - 1] + z[i - 1][j + 1];"""),
    "water column with time": _nest("int n, int steps, double z[n + 2][n + 2][n + 2]", """
    for (int t = 0; t < steps; t++)
        for (int i = 1; i <= n; i++)
            for (int j = 1; j <= n; j++)
                for (int k = 1; k <= n; k++)
                    z[i][j][k] = z[i - 1][j][k] + z[i + 1][j][k] + z[i][j - 1][k] + z[i][j][k + 1];"""),
    "factors with pivots": _nest("int n, double z[n][n]", """
    for (int k = 0; k < n; k++) {
        for (int i = k + 1; i < n; i++)
            z[i][k] = z[i][k] / z[k][k];
        for (int p = k + 1; p < n; p++)
            for (int j = k + 1; j < n; j++)
                z[p][j] -= z[p][k] * z[k][j];
    }"""),
    "columns from the left": _nest("int n, double z[n][n]", """
    for (int j = 0; j < n; j++) {
        for (int k = 0; k < j; k++)
            for (int i = j; i < n; i++)
                z[i][j] -= z[i][k] * z[j][k];
        for (int r = j + 1; r < n; r++)
            z[r][j] = z[r][j] / z[j][j];
    }"""),
    "forward substitution": _nest("int n, int m, double l[n][n], double x[n][m]", """
    for (int r = 0; r < m; r++)
        for (int i = 0; i < n; i++) {
            for (int k = 0; k < i; k++)
                x[i][r] -= l[i][k] * x[k][r];
            x[i][r] = x[i][r] / l[i][i];
        }"""),
    "back substitution": _nest("int n, double u[n][n], double x[n]", """
    for (int i = n - 1; i >= 0; i--) {
        for (int k = i + 1; k < n; k++)
            x[i] -= u[i][k] * x[k];
        x[i] = x[i] / u[i][i];
    }"""),
    "sweep and copy": _nest("int n, int steps, double z[n + 2], double y[n + 2]", """
    for (int t = 0; t < steps; t++) {
        for (int i = 1; i <= n; i++)
            y[i] = z[i - 1] + z[i + 1];
        for (int k = 1; k <= n; k++)
            z[k] = y[k];
    }"""),
    "clear and add": _nest("int n, double c[n][n], double a[n][n], double b[n][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            c[i][j] = 0.0;
            for (int k = 0; k < n; k++)
                c[i][j] += a[i][k] * b[k][j];
        }"""),
    "contraction": _nest("int n, int m, double c[n][n], double a[n][m][m], double b[m][m][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            for (int k = 0; k < m; k++)
                for (int l = 0; l < m; l++)
                    c[i][j] += a[i][k][l] * b[l][k][j];"""),
    "before, in and after": _nest("int n, int m, double z[n + 1][m + 1], double edge[n + 1]", """
    for (int i = 0; i < n; i++) {
        edge[i] = z[i][0];
        for (int j = 0; j < m; j++)
            z[i + 1][j] = z[i][j + 1] + edge[i];
        edge[i + 1] = z[i + 1][m];
    }"""),
    "two sweeps after one another": _nest("int n, double z[n + 2], double y[n + 2]", """
    for (int i = 0; i < n; i++) {
        for (int j = 0; j < i; j++)
            z[j] = y[j + 1];
        for (int k = i; k < n; k++)
            y[k] = z[k + 1];
    }"""),
    "ping and echo": _nest("int n, int m, double z[n + 2][m + 2], double y[n + 2][m + 2]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++) {
            z[i][j] = y[i + 1][j] + 1.0;
            y[i][j] = z[i][j + 1] * 0.5;
        }"""),
}

NESTS = GUARDED | STRIDED | BOUNDED | SUBSCRIPTS | SEVERAL

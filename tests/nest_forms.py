"""Forms of C that hot loops are written in: (name, text with one nest, sizes, plans).  All code is invented."""

from __future__ import annotations

FORMS: tuple[tuple[str, str, dict[str, int], tuple[str, ...]], ...] = (
    ("a bound cut by if", """\
void survey(int n, double *depth) {
    for (int ii = 0; ii < n; ii += 4) {
        int hi = ii + 4;
        if (hi > n)
            hi = n;
        for (int i = ii; i < hi; i++)
            depth[i] += 1;
    }
}
""", {"n": 11}, ("ii i:2 i", "ii:2 ii i")),
    ("a window cut at both ends", """\
void survey(int n, double *restrict depth, double *restrict echo) {
    for (int i = 0; i < n; ++i) {
        int lo = i - 2, hi = i + 2;
        if (lo < 0) lo = 0;
        if (hi >= n) { hi = n - 1; }
        double sum = 0;
        for (int k = lo; k <= hi; ++k)
            sum += depth[k];
        echo[i] = sum;
    }
}
""", {"n": 7}, ("i:3 i", "i:3 k:2 i k", "i:4 k i", "i:2 k:3 k i; remainder peel")),
    ("a bound set twice", """\
void survey(int n, double (*restrict depth)[12]) {
    int most;
    for (int i = 0; i < n; ++i) {
        if (i < 3)
            most = i;
        else
            most = 3;
        for (int k = 0; k < most; ++k)
            depth[i][k] = 4;
        most = n - i;
        for (int l = 0; l < most; ++l)
            depth[i][l] += 1;
    }
}
""", {"n": 8}, ("i:3 i", "i:2 k l i", "i:4 l:2 i l")),
    ("a bound from an older value", """\
void survey(int n, double *restrict depth) {
    int m, most;
    for (int i = 0; i < n; ++i) {
        m = i;
        most = m - 1;
        m = 2;
        for (int k = 0; k < most; ++k)
            depth[k + m] += i;
    }
}
""", {"n": 7}, ("i:3 i", "k i", "i:2 k i")),
    ("a pointer set twice", """\
void survey(int n, double *restrict depth, double *restrict echo) {
    double *row;
    for (int i = 0; i < n; ++i) {
        row = depth + i * 9;
        for (int k = 0; k < n; ++k)
            row[k] = 2;
        row = echo + 2 * i;
        for (int l = 0; l < n; ++l)
            row[l] += depth[9 * i + l];
    }
}
""", {"n": 6}, ("i:3 i", "i:2 k:2 i k", "l:2 i l", "k l i")),
)  # fmt: skip

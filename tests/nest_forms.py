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
    ("a step that is a constant of the function", """\
static const int depth_step = 2;
void survey(int n, double *restrict depth, double *restrict echo) {
    const int across = 3;
    int width = 5;
    for (int i = 0; i < n; i += depth_step)
        for (int j = 0; j < n; j += across)
            depth[i * width + j] += echo[j];
}
""", {"n": 7}, ("j i", "i:2 j:2 j i", "j:2 i j")),
    ("structures copied whole", """\
struct sounding { double x, y; int quality; };
void survey(int n, struct sounding (*restrict to)[9], struct sounding (*restrict from)[9]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            struct sounding one = from[j][i];
            one.x += 1;
            to[i][j] = one;
            to[i][j].y = from[i][j].quality;
        }
}
""", {"n": 5}, ("j i", "i:2 j:2 i j", "j:3 i j")),
    ("structures with a list of values", """\
struct sounding { double x, y; int quality; };
void survey(int n, double (*restrict depth)[9], struct sounding (*restrict to)[9]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            struct sounding one = { depth[i][j], 2 * depth[j][i], 1 };
            to[i][j] = one;
        }
}
""", {"n": 5}, ("j i", "i:2 j:2 i j")),
    ("rows of structures moved", """\
struct sounding { double x, y; };
void survey(int n, struct sounding (*track)[9]) {
    for (int i = 0; i < n; i++)
        for (int j = 1; j < n; j++)
            track[i][j] = track[i + 1][j - 1];
}
""", {"n": 5}, ("j i", "i:2 i j", "i j:3 j")),
)  # fmt: skip

# Forms that the interpreter of the tests does not know: built, run, and compared with the original, sanitizers on.
COMPILED: tuple[tuple[str, str, dict[str, int], tuple[str, ...]], ...] = (
    ("an anonymous structure in one", """\
struct sounding { struct { double x, y; }; int n; };
void survey(int n, struct sounding (*restrict to)[64], struct sounding (*restrict from)[64]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            to[i][j] = from[j][i];
            to[i][j].x += 1;
        }
}
""", {"n": 4}, ("j i", "j:3 i j")),
    ("arrays in structures copied whole", """\
struct sounding { double x[3]; struct { int a, b[2]; } quality; };
void survey(int n, struct sounding (*restrict to)[64], struct sounding (*restrict from)[64]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            struct sounding one = from[j][i];
            one.x[j % 3] += 1;
            to[i][j] = one;
            to[i][j].quality = from[i][j].quality;
        }
}
""", {"n": 4}, ("j i", "j:3 i j")),
    ("a type of the function's own", """\
typedef struct { double x; } place;
void survey(int n, place *restrict spot, double *restrict echo) {
    typedef double real;
    struct pair { real u; real w; };
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            struct pair one = { echo[i], spot[i * n + j].x };
            spot[i * n + j].x = one.u * one.w + sizeof one;
        }
}
""", {"n": 4}, ("j i", "j:3 i j")),
    ("bits of a number seen as an integer", """\
union word { float f; unsigned u; };
void survey(int n, union word (*restrict depth)[64], float (*restrict echo)[64]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            union word one = depth[j][i];
            one.u &= 0x7fffffffu;
            echo[i][j] = one.f;
            depth[i][j + 1].u ^= 0x80000000u;
        }
}
""", {"n": 6}, ("i:2 i j", "i j:3 j")),
    ("a union in a structure", """\
struct sounding { int kind; union { float depth; int code; }; };
void survey(int n, struct sounding (*restrict track)[64]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            track[i][j].code = track[i][j].kind + j;
            track[i][j].kind = i;
        }
}
""", {"n": 6}, ("j i", "j:2 i:2 i j")),
)  # fmt: skip

"""Variants by hand of a few functions, right ones and wrong ones, for the judge to tell apart.

Each group has an original; a variant is a text in its place.  A wrong one names a piece of what has to be said of it.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Group:
    """An original and its variants, each a body of the same function."""

    head: str
    original: str
    right: dict[str, str]
    wrong: dict[str, tuple[str, str]]  # name -> (body, what is said)
    sizes: tuple[dict[str, int], ...] = tuple({"n": n} for n in (0, 1, 2, 3, 4, 5, 8, 9))
    before: str = ""  # at file scope

    def text(self, body: str) -> str:
        """The whole file."""
        return f"{self.before}{self.head} {{\n{body}\n}}\n"


BEAMS = "void form(int n, double beams[n][n], double weights[n][n], double echoes[n][n])"
_PLAIN = """for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            for (int k = 0; k < n; k++)
                beams[i][j] += weights[i][k] * echoes[k][j];"""
_CHUNKED = """for (int k0 = 0; k0 < n; k0 += 4)
        for (int i = 0; i < n; i++)
            for (int k = k0; k < (k0 + 4 < n ? k0 + 4 : n); k++)
                for (int j = 0; j < n; j++)
                    beams[i][j] += weights[i][k] * echoes[k][j];"""
_HELD = """for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            double sum = beams[i][j];
            for (int k = 0; k < n; k++)
                sum += weights[i][k] * echoes[k][j];
            beams[i][j] = sum;
        }"""
_BLOCK = """int i = 0;
    for (; i + 2 <= n; i += 2) {
        int j = 0;
        for (; j + 4 <= n; j += 4) {
            _Alignas(64) double held[2][4];
            for (int r = 0; r < 2; r++)
                for (int c = 0; c < 4; c++)
                    held[r][c] = beams[i + r][j + c];
            for (int k = 0; k < n; k++)
                for (int r = 0; r < 2; r++)
                    for (int c = 0; c < 4; c++)
                        held[r][c] += weights[i + r][k] * echoes[k][j + c];
            for (int r = 0; r < 2; r++)
                for (int c = 0; c < 4; c++)
                    beams[i + r][j + c] = held[r][c];
        }
        for (; j < n; j++)
            for (int r = 0; r < 2; r++)
                for (int k = 0; k < n; k++)
                    beams[i + r][j] += weights[i + r][k] * echoes[k][j];
    }
    for (; i < n; i++)
        for (int j = 0; j < n; j++)
            for (int k = 0; k < n; k++)
                beams[i][j] += weights[i][k] * echoes[k][j];"""
_PACKED = """double *restrict strip = malloc((size_t)n * 4 * sizeof *strip);
    if (strip != NULL) {
        for (int j0 = 0; j0 < n; j0 += 4) {
            int wide = n - j0 < 4 ? n - j0 : 4;
            for (int k = 0; k < n; k++) {
                for (int c = 0; c < wide; c++)
                    strip[k * 4 + c] = echoes[k][j0 + c];
                for (int c = wide; c < 4; c++)
                    strip[k * 4 + c] = 0.0;
            }
            for (int i = 0; i < n; i++) {
                double held[4] = { 0.0 };
                for (int c = 0; c < wide; c++)
                    held[c] = beams[i][j0 + c];
                for (int k = 0; k < n; k++)
                    for (int c = 0; c < 4; c++)
                        held[c] += weights[i][k] * strip[k * 4 + c];
                for (int c = 0; c < wide; c++)
                    beams[i][j0 + c] = held[c];
            }
        }
        free(strip);
    } else {
        for (int i = 0; i < n; i++)
            for (int j = 0; j < n; j++)
                for (int k = 0; k < n; k++)
                    beams[i][j] += weights[i][k] * echoes[k][j];
    }"""
_COPIED = """double row[n + 1];
    for (int i = 0; i < n; i++) {
        memcpy(row, weights[i], (size_t)n * sizeof(double));
        for (int k = 0; k < n; k++)
            for (int j = 0; j < n; j++)
                beams[i][j] += row[k] * echoes[k][j];
    }"""
_PARALLEL = """#pragma omp parallel for schedule(static)
    for (int i = 0; i < n; i++)
        for (int k = 0; k < n; k++)
            for (int j = 0; j < n; j++)
                beams[i][j] += weights[i][k] * echoes[k][j];"""
_BACK = """double *out = aligned_alloc(64, ((size_t)n * n * sizeof(double) + 63) / 64 * 64 + 64);
    if (!out) {
        """ + _PLAIN + """
        return;
    }
    double *restrict line = __builtin_assume_aligned(out, 64);
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            line[i * n + j] = beams[i][j];
    for (int k = 0; k < n; k++)
        for (int i = 0; i < n; i++)
            for (int j = 0; j < n; j++)
                line[i * n + j] += weights[i][k] * echoes[k][j];
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            beams[i][j] = line[i * n + j];
    free(out);"""
_STATIC = """static _Thread_local double column[64];
    for (int j = 0; j < n; j++) {
        for (int k = 0; k < n; k++)
            column[k] = echoes[k][j];
        for (int i = 0; i < n; i++)
            for (int k = 0; k < n; k++)
                beams[i][j] += weights[i][k] * column[k];
    }"""
_MEMALIGN = _PACKED.replace("double *restrict strip = malloc((size_t)n * 4 * sizeof *strip);\n    if (strip != NULL) {",
                            "double *strip;\n    if (posix_memalign((void **)&strip, 64, (size_t)n * 32 + 64) == 0) {")

_SUM = "weights[i][k] * echoes[k][j]"
_DEEP, _ROW = "\n                    ", "\n            "  # line ends inside the loops above


PRODUCT = Group(
    BEAMS, _PLAIN,
    right={
        "the same": _PLAIN, "chunks": _CHUNKED, "a held sum": _HELD, "register blocks": _BLOCK, "packed": _PACKED,
        "a copied row": _COPIED, "threads": _PARALLEL, "packed and written back": _BACK,
        "a buffer of the thread": _STATIC,
        "memory by posix_memalign": _MEMALIGN,
    },
    wrong={
        "additions backwards": (_PLAIN.replace("int k = 0; k < n; k++", "int k = n - 1; k >= 0; k--"), "another value"),
        "operands of the sum swapped": (_PLAIN.replace(f"+= {_SUM}", f"= {_SUM} + beams[i][j]"), "another value"),
        "two partial sums": (_HELD.replace("double sum = beams[i][j];", "double sum = 0;")
                             .replace("beams[i][j] = sum;", "beams[i][j] += sum;"), "another value"),
        "fused by hand": (_PLAIN.replace(f"+= {_SUM}", "= fma(weights[i][k], echoes[k][j], beams[i][j])"),
                          "another value"),
        "held in a narrow type": (_HELD.replace("double sum", "float sum"), "another value"),
        "no remainder": (_CHUNKED.replace("k0 < n;", "k0 + 4 <= n;"), "never written"),
        "the last chunk too long": (_CHUNKED.replace("(k0 + 4 < n ? k0 + 4 : n)", "k0 + 4"), "outside"),
        "a chunk done twice": (_CHUNKED.replace("k0 += 4", "k0 += 3"), "another value"),
        "chunks from one": (_CHUNKED.replace("int k0 = 0", "int k0 = 1"), ""),
        "the chunk outermost, wrongly": (_CHUNKED.replace("k0 += 4)", "k0 += 4)\n        if (k0 < 8)"), ""),
        "a block cell never loaded": (_BLOCK.replace(f"c < 4; c++){_DEEP}held[r][c] = beams",
                                                     f"c < 3; c++){_DEEP}held[r][c] = beams"), "before it has a value"),
        "a block cell never stored": (_BLOCK.replace(f"c < 4; c++){_DEEP}beams", f"c < 3; c++){_DEEP}beams"), ""),
        "rows of a block mixed up": (_BLOCK.replace("held[r][c] += weights[i + r]", "held[r][c] += weights[i + 1 - r]"),
                                     "another value"),
        "a block too many": (_BLOCK.replace("j + 4 <= n", "j + 3 <= n"), "outside"),
        "reads beyond the row": (_PACKED.replace(f"c < wide; c++){_DEEP}strip", f"c < 4; c++){_DEEP}strip"), "outside"),
        "padding never set": (_PACKED.replace(f"for (int c = wide; c < 4; c++){_DEEP}strip[k * 4 + c] = 0.0;", ";"),
                              "before it has a value"),
        "padding written back": (_PACKED.replace(f"c < wide; c++){_DEEP}beams", f"c < 4; c++){_DEEP}beams"), "outside"),
        "not written back": (_BACK.replace("beams[i][j] = line[i * n + j];\n", ";\n"), "never written"),
        "a leak": (_PACKED.replace("free(strip);", ""), "never freed"),
        "freed too early": (_PACKED.replace("free(strip);\n", "")
                            .replace(f"{_ROW}for (int i = 0; i < n; i++) {{\n                double",
                                     f"{_ROW}free(strip);{_ROW}for (int i = 0; i < n; i++) {{\n                double"),
                            "after it was freed"),
        "freed twice": (_PACKED.replace("free(strip);", "free(strip);\n        free(strip);"), "freed twice"),
        "no memory, no care": (_PACKED.replace("if (strip != NULL)", "if (1)"), "where no memory can be allocated"),
        "the fallback has a fault": (_PACKED.replace("} else {\n        for (int i = 0;",
                                                     "} else {\n        for (int i = 1;"), "where no memory can be allocated"),
        "a buffer too small": (_PACKED.replace("(size_t)n * 4 *", "(size_t)n * 3 *"), "outside its"),
        "half a row copied": (_COPIED.replace("(size_t)n * sizeof", "(size_t)n / 2 * sizeof"), "before it has a value"),
        "a thread's column of another": (_STATIC.replace(f"int k = 0; k < n; k++){_ROW}column",
                                                         f"int k = 1; k < n; k++){_ROW}column"), ""),
        "a narrow iterator": (_PLAIN.replace("int k = 0", "_Bool k = 0"), ""),
        "rows past the end": (_PLAIN.replace("int i = 0; i < n", "int i = 0; i <= n"), "does not touch"),
    })  # fmt: skip

SWEEP = Group(
    "void settle(int n, double depth[n][n], double *best, int *last)",
    """int i;
    for (i = 1; i < n; i++)
        for (int j = 1; j < n - 1; j++) {
            depth[i][j] = 0.5 * depth[i - 1][j + 1];
            if (depth[i][j] > *best)
                *best = depth[i][j];
        }
    *last = i;""",
    right={"a skewed order": """int i;
    for (i = 1; i < n; i++)
        for (int j = 1; j < n - 1; j++) {
            const double value = depth[i - 1][j + 1] * 1;
            depth[i][j] = 0.5 * depth[i - 1][j + 1];
            if (!(depth[i][j] <= best[0]) || value != value)
                *best = depth[i][j];
        }
    *last = i;"""},
    wrong={
        "exchanged": ("""int i = 1;
    for (int j = 1; j < n - 1; j++)
        for (i = 1; i < n; i++) {
            depth[i][j] = 0.5 * depth[i - 1][j + 1];
            if (depth[i][j] > *best)
                *best = depth[i][j];
        }
    *last = n > 1 ? n : 1;""", "another value"),
        "a lost last value": ("""int i;
    for (int r = 1; r < n; r++)
        for (int j = 1; j < n - 1; j++) {
            depth[r][j] = 0.5 * depth[r - 1][j + 1];
            if (depth[r][j] > *best)
                *best = depth[r][j];
        }
    *last = i;""", "before it has a value"),
        "a branch turned round": ("""int i;
    for (i = 1; i < n; i++)
        for (int j = 1; j < n - 1; j++) {
            depth[i][j] = 0.5 * depth[i - 1][j + 1];
            if (depth[i][j] < *best)
                *best = depth[i][j];
        }
    *last = i;""", ""),
    })  # fmt: skip

WRITES = Group(
    "void mark(int n, double *flag, const double *height)",
    """for (int i = 0; i < n; i++) {
        flag[i / 2] = height[i];
        flag[i / 2] = 0.0;
    }""",
    right={"written twice as often, by halves": """for (int i = 0; i < n; i += 2)
        for (int r = i; r < (i + 2 < n ? i + 2 : n); r++) {
            flag[r / 2] = height[r];
            flag[r / 2] = 0.0;
        }"""},
    wrong={
        "backwards, with the same end": ("""for (int i = n - 1; i >= 0; i--) {
        flag[i / 2] = height[i];
        flag[i / 2] = 0.0;
    }""", "in another order"),
        "an iteration done twice, with the same end": ("""for (int i = 0; i < n; i++) {
        flag[i / 2] = height[i];
        flag[i / 2] = 0.0;
    }
    for (int i = n - 1; i < n; i++)
        if (i >= 0)
            flag[i / 2] = 0.0;""", "times"),
        "a cell that is only read": ("""for (int i = 0; i < n; i++) {
        flag[i / 2] = height[i];
        flag[i / 2] = 0.0;
        ((double *)height)[i] = height[i];
    }""", "only reads"),
        "threads on one cell": ("""#pragma omp parallel for
    for (int i = 0; i < n; i++) {
        flag[i / 2] = height[i];
        if (i % 2 == 0 || i < n)
            flag[i / 2] = i % 2 ? height[i] * 0 + height[i] - height[i] : 0.0;
    }""", ""),
    })  # fmt: skip

PREFIX = Group(
    "void prefix(int n, double *sum)",
    "for (int i = 1; i < n; i++)\n        sum[i] += sum[i - 1];",
    right={"held": """double last = n > 0 ? 0.0 : 1.0;
    if (n > 1)
        last = sum[0];
    for (int i = 1; i < n; i++) {
        last = sum[i] + last;
        sum[i] = last;
    }"""},
    wrong={"threads on a recurrence": ("""#pragma omp parallel for
    for (int i = 1; i < n; i++)
        sum[i] += sum[i - 1];""", "reversed")})

STRUCTS = Group(
    "void fill(const struct grid *g)",
    """for (int r = 0; r < g->rows; r++)
        for (int c = 0; c < g->cols; c++)
            g->depth[r * g->cols + c] = total[r] + c;""",
    right={"exchanged": """const int cols = g->cols, rows = g->rows;
    double *depth = g->depth;
    for (int c = 0; c < cols; c++)
        for (int r = 0; r < rows; r++)
            depth[r * cols + c] = total[r] + c;"""},
    wrong={"rows and columns mixed up": ("""for (int c = 0; c < g->rows; c++)
        for (int r = 0; r < g->cols; r++)
            g->depth[r * g->cols + c] = total[r] + c;""", ""),
           "a global changed": ("""for (int r = 0; r < g->rows; r++)
        for (int c = 0; c < g->cols; c++)
            g->depth[r * g->cols + c] = total[r] + c;
    total[0] = total[0];""", "total")},
    sizes=({"g->rows": 3, "g->cols": 4}, {"g->rows": 4, "g->cols": 2}, {"g->rows": 1, "g->cols": 5}),
    before="struct grid { int rows, cols; double *depth; };\nstatic double total[9];\n")  # fmt: skip

GROUPS = {"product": PRODUCT, "sweep": SWEEP, "writes": WRITES, "prefix": PREFIX, "structs": STRUCTS}

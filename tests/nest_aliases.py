"""Nests whose names lead to the same memory, and what a reading of them must know about that.

``missed`` runs a function in the interpreter of ``oracle.py`` and looks at every two statement instances that share a
cell, one of them writing: the nest must know it too, by the same storage with the same subscripts or by an assumption
about the two storages.  What it does not know would be a dependence that no verdict sees.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator, Mapping

from nest_execution import parameter_values
from oracle_run import Program
from oracle_values import Instance
from retile.model import Access, Nest
from retile.sets import Region

Where = tuple[int, tuple[tuple[str, int], ...]]  # line, values of the iterators
Seen = tuple[Access, tuple[int, ...] | None]  # an access and its subscripts' values


def missed(text: str, nest: Nest, sizes: Mapping[str, int], run: str = "", granule: int = 1) -> list[str]:
    """Pairs of instances that share a cell when a function runs, of which the nest knows nothing.

    ``run``: a function that calls the nest's; ``granule``: bytes that count as one cell.
    """
    line = nest.address.line
    machine = Program(text, nest=line).run(run or nest.function, dict(sizes), may=True, steps=5000)
    runs: dict[tuple[int, tuple[tuple[str, int], ...]], list[Instance]] = defaultdict(list)
    for instance in machine.instances:
        outer = tuple((loop.name, loop.value) for loop in instance.loops if loop.line < line)
        runs[instance.run, outer].append(instance)
    known = {frozenset(a.storages) for a in nest.assumptions if a.storages}
    problems = []
    for (_, outer), instances in runs.items():
        read = _read(nest, {**sizes, **dict(outer)})
        for cell, one, other in _meetings(instances, line, granule):
            if not _meets(read[one], read[other], known):
                problems.append(f"{cell}: {one} and {other}")
    return problems


def _meetings(instances: list[Instance], line: int, granule: int) -> Iterator[tuple[object, Where, Where]]:
    """All pairs of instances of one run that share a cell, one of them writing."""
    here: dict[tuple[str, object, int], dict[Where, bool]] = defaultdict(dict)
    for instance in instances:
        where = (instance.line, tuple((loop.name, loop.value) for loop in instance.loops if loop.line >= line))
        for obj, offset, writes in instance.accesses:
            if not getattr(obj, "iterator", False):
                cell = (obj.kind, obj.declared, offset // granule)
                here[cell][where] = here[cell].get(where, False) or writes
    for cell, touching in here.items():
        for at, (one, writes) in enumerate(touching.items()):
            for other, also in list(touching.items())[at + 1:]:
                if writes or also:
                    yield cell, one, other


def _read(nest: Nest, sizes: Mapping[str, int]) -> dict[Where, list[Seen]]:
    values = parameter_values(nest, sizes)
    found: dict[Where, list[Seen]] = defaultdict(list)
    for statement in nest.statements:
        for point in Region.where(statement.domain).at(values).points(statement.loops):
            here = {**values, **dict(zip(statement.loops, point, strict=True))}
            named = tuple((nest.loop(id).iterator, value) for id, value in zip(statement.loops, point, strict=True))
            found[statement.span.line, named] += list(_evaluated(statement.accesses, here))
    return found


def _evaluated(accesses: tuple[Access, ...], values: Mapping[str, int]) -> Iterator[Seen]:
    for access in accesses:
        yield access, None if access.subscripts is None else tuple(form.evaluate(values) for form in access.subscripts)


def _meets(one: list[Seen], other: list[Seen], known: set[frozenset[str]]) -> bool:
    for a, at in one:
        for b, there in other:
            if not (a.write or b.write):
                continue
            if a.storage == b.storage and (at is None or there is None or at == there):
                return True
            if frozenset((a.storage, b.storage)) in known:
                return True
    return False


_STRUCTS = """\
struct swath { double d[8]; double *h; double *rows[4]; int n; };
struct sounding { double x, y; };
"""

# (name, parameters, what stands before the nest, body of loops over i < n and j < 4)
_CASES = (
    ("a local name for an array", "double *z", "double a[9] = {0}; double *q = a;", "q[i] = a[j];"),
    ("a local name set later", "double *z", "double a[9] = {0}; double *q; q = a;", "q[i] = a[j];"),
    ("an offset", "double *a", "double *q = a + 2;", "q[i] = a[j];"),
    ("an offset set later", "double *a", "double *q; q = a + 2;", "q[i] = a[j];"),
    ("a row of a matrix", "double a[][4]", "double *q = &a[1][0];", "a[i][j] = q[j];"),
    ("all rows of a matrix", "double a[][4]", "double *q = &a[0][0];", "a[i][j] = q[4 * j + i];"),
    ("rows from the second on", "double a[][4]", "double (*q)[4] = a + 1;", "a[i][j] = q[i][j];"),
    ("a matrix seen as numbers", "double *a", "double (*q)[4] = (double (*)[4])a;", "q[i][j] = a[4 * j + i];"),
    ("a row set in the nest", "double *a", "", "double *q = a + i; q[j] = a[j];"),
    ("two structures", "struct swath *g", "struct swath *h; h = g;", "h->d[i] = g->d[j];"),
    ("two structures, pointer members", "struct swath *g", "struct swath *h; h = g;", "h->h[i] = g->h[j];"),
    ("spelled in three ways", "struct swath *g", "", "g[0].h[i] = g->h[j] + (*g).h[i + j];"),
    ("one and many", "struct swath *g", "", "g[i].h[j] = g->h[j + 1];"),
    ("fixed and many rows", "struct swath *g", "", "g->rows[j][i] = g->rows[0][i + 1];"),
    ("two fixed rows", "struct swath *g", "", "g->rows[0][i] = g->rows[1][j] + g->rows[0][j];"),
    ("rows of pointers", "double **p", "", "p[j][i] = p[0][j] + (*p)[i];"),
    ("the first row in two ways", "double **p", "", "(*p)[i] = p[0][j];"),
    ("a hidden pointer", "struct swath *g, struct swath *f", "", "g->h[i] = 1; { struct swath *g = f; g->h[j] = 2; }"),
    ("a pointer of the nest", "struct swath *g", "", "struct swath *s = g; s->h[i] = g->h[j];"),
    ("an element's address", "struct swath *g", "", "struct swath *s = &g[i]; s->d[j] = g[j].d[i];"),
    ("restrict, a row of it", "double (*restrict a)[4]", "double *q; q = a[0];", "a[i][j] = q[j];"),
    ("restrict, the first row of it", "double (*restrict a)[4]", "double *q; q = *a;", "a[i][j] = q[j];"),
    ("restrict, an array member", "struct swath *restrict g", "double *q; q = g->d;", "g->d[i] = q[j];"),
    ("restrict, kept elsewhere", "double *restrict a, struct swath *g", "g->h = a;", "a[i] = g->h[j];"),
    ("a member as numbers", "struct sounding *s", "double *q = &s->x;", "s[i].y = q[2 * j + 1];"),
    ("the address of a variable", "double *a", "double x = 0; double *q; q = &x;", "*q = a[i]; a[j] = x;"),
    ("a file's own array", "double *a", "double *q = kept;", "q[i] = kept[j];"),
    ("constant", "double *a", "const double *q = a + 1;", "a[i] = q[j];"),
    ("several declarators", "double *a", "double *q = a, *r = q + 1, t[9] = {0}, *u = t;", "q[i] = r[j]; t[i] = u[j];"),
)  # fmt: skip


def _text(parameters: str, before: str, body: str) -> str:
    lines = body.replace("; ", ";\n            ")
    return (f"{_STRUCTS}static double kept[9];\nvoid sweep(int n, {parameters}) {{\n    {before}\n"
            f"    for (int i = 0; i < n; i++)\n        for (int j = 0; j < 4; j++) {{\n            {lines}\n        }}\n}}\n")


ALIASES = {name: _text(*rest) for name, *rest in _CASES}

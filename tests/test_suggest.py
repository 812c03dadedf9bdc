"""What is suggested for nests whose best treatment is common knowledge, that it is legal, and when to leave a nest."""

from __future__ import annotations

import json

import pytest
from command_line import SAMPLES, line_of, retile

from retile import open_file
from retile.host import Cache, Fact, Host, describe, vectors_of
from retile.model import Verdict
from retile.suggest.blocks import shapes
from retile.suggest.machine import Machine

KIB = 1024
UNKNOWN = Fact.unknown()


def host_with(vector: int, registers: int, second: int = 512 * KIB) -> Host:
    """A machine of the tests' own, so that what is suggested does not depend on the one that runs them."""
    caches = tuple(Cache(level, "unified", size, 64, 8, 1, "test")
                   for level, size in ((1, 32 * KIB), (2, second), (3, 32 * KIB * KIB)))
    return Host(UNKNOWN, UNKNOWN, UNKNOWN, caches, Fact(4096, "test"), (), UNKNOWN, UNKNOWN, UNKNOWN, UNKNOWN,
                Fact(vector, "test"), Fact(registers, "test"))


HOST = host_with(32, 16)

NESTS = {
    "product": ("""\
void form_beams(int n, const double weights[n][n], const double echoes[n][n], double beams[restrict n][n])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            for (int k = 0; k < n; k++)
                beams[i][j] += weights[i][k] * echoes[k][j];
}
""", "register block"),
    "dots": ("""\
void correlate(int n, int m, int q, const float first[restrict n][q], const float second[restrict m][q],
               float out[restrict n][m])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++) {
            float sum = 0;
            for (int k = 0; k < q; k++)
                sum += first[i][k] * second[j][k];
            out[i][j] = sum;
        }
}
""", "register block"),
    "gram": ("""\
void normal_matrix(int rows, int n, const double design[restrict rows][n], double normal[restrict n][n])
{
    for (int k = 0; k < n; k++)
        for (int l = 0; l <= k; l++)
            for (int i = 0; i < rows; i++)
                normal[k][l] += design[i][k] * design[i][l];
}
""", "register block"),
    "turn": ("""\
void turn(int n, double to[restrict n][n], const double from[restrict n][n])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            to[i][j] = from[j][i];
}
""", "transposition"),
    "column sums": ("""\
void sums(int pings, int beams, const double *restrict level, double *restrict sum)
{
    for (int b = 0; b < beams; b++)
        for (int p = 0; p < pings; p++)
            sum[b] += level[p * beams + b];
}
""", "unroll and jam"),
    "transposed matrix and vector": ("""\
void right_side(int n, int m, const double design[restrict n][m], const double level[restrict n],
                double right[restrict m])
{
    for (int k = 0; k < m; k++) {
        double sum = 0;
        for (int i = 0; i < n; i++)
            sum += design[i][k] * level[i];
        right[k] = sum;
    }
}
""", "unroll and jam"),
    "matrix and vector": ("""\
void tide(int n, int m, const double design[restrict n][m], const double part[restrict m], double level[restrict n])
{
    for (int i = 0; i < n; i++) {
        double sum = 0;
        for (int k = 0; k < m; k++)
            sum += design[i][k] * part[k];
        level[i] = sum;
    }
}
""", "unroll and jam"),
    "sweeps": ("""\
void settle(int steps, int n, double load[2][n][n])
{
    for (int t = 0; t < steps; t++)
        for (int y = 1; y < n - 1; y++)
            for (int x = 1; x < n - 1; x++)
                load[(t + 1) % 2][y][x] = 0.25 * (load[t % 2][y - 1][x] + load[t % 2][y + 1][x]
                                                  + load[t % 2][y][x - 1] + load[t % 2][y][x + 1]);
}
""", "time skewing"),
    "two sweeps": ("""\
void drift(int steps, int n, double load[restrict n][n], double next[restrict n][n])
{
    for (int t = 0; t < steps; t++) {
        for (int y = 1; y < n - 1; y++)
            for (int x = 1; x < n - 1; x++)
                next[y][x] = 0.25 * (load[y - 1][x] + load[y + 1][x] + load[y][x - 1] + load[y][x + 1]);
        for (int y = 1; y < n - 1; y++)
            for (int x = 1; x < n - 1; x++)
                load[y][x] = next[y][x];
    }
}
""", "time skewing"),
    "sweeps in place": ("""\
void relax(int steps, int n, double z[n][n])
{
    for (int s = 0; s < steps; s++)
        for (int i = 1; i < n - 1; i++)
            for (int j = 1; j < n - 1; j++)
                z[i][j] = 0.25 * (z[i - 1][j] + z[i + 1][j] + z[i][j - 1] + z[i][j + 1]);
}
""", "time skewing"),
    "wrong order": ("""\
void scale(int n, float *restrict picture, const float *restrict cell)
{
    for (int c = 0; c < n; c++)
        for (int r = 0; r < n; r++)
            picture[r * n + c] = 2 * cell[r * n + c];
}
""", "order"),
    "sums along rows": ("""\
void along(int rows, int n, double sums[rows][n])
{
    for (int r = 0; r < rows; r++)
        for (int c = 1; c < n; c++)
            sums[r][c] += sums[r][c - 1];
}
""", "unroll and jam"),
    "four loops": ("""\
void layer(int out, int in, int n, const float echo[restrict in][n + 2], const float w[restrict out][in][3],
           float to[restrict out][n])
{
    for (int o = 0; o < out; o++)
        for (int x = 0; x < n; x++)
            for (int c = 0; c < in; c++)
                for (int q = 0; q < 3; q++)
                    to[o][x] += echo[c][x + q] * w[o][c][q];
}
""", "register block"),
}

LEFT = {
    "a stream": ("""\
void mix(int n, double *restrict a, const double *restrict b, const double *restrict c)
{
    for (int i = 0; i < n; i++)
        a[i] = b[i] + 3 * c[i];
}
""", "single loop"),
    "a stream of rows": ("""\
void mix(int n, double a[restrict n][n], const double b[restrict n][n])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i][j] = 2 * b[i][j];
}
""", "speed of memory"),
    "a filter": ("""\
void smooth(int n, const float in[restrict n][n], float out[restrict n][n], const float w[restrict 5][5])
{
    for (int i = 2; i < n - 2; i++)
        for (int j = 2; j < n - 2; j++) {
            float sum = 0;
            for (int p = 0; p < 5; p++)
                for (int q = 0; q < 5; q++)
                    sum += w[p][q] * in[i + p - 2][j + q - 2];
            out[i][j] = sum;
        }
}
""", "neighbours"),
    "one sweep": ("""\
void smooth(int n, const double in[restrict n][n], double out[restrict n][n])
{
    for (int i = 1; i < n - 1; i++)
        for (int j = 1; j < n - 1; j++)
            out[i][j] = in[i][j] + in[i - 1][j] + in[i + 1][j] + in[i][j - 1] + in[i][j + 1];
}
""", "neighbours"),
}


def nest_of(folder, text):
    path = folder / "survey.c"
    path.write_text(text)
    line = next(number for number, row in enumerate(text.splitlines(), 1) if row.lstrip().startswith("for"))
    return open_file(str(path)).nest(line)


@pytest.mark.parametrize("name", NESTS)
def test_the_first_suggestion_is_of_the_expected_kind_and_all_are_legal(tmp_path, name):
    text, kind = NESTS[name]
    nest = nest_of(tmp_path, text)
    advice = nest.suggest(host=HOST)
    assert advice.leave is None and 1 <= len(advice.suggestions) <= 10
    assert advice.suggestions[0].kind == kind
    texts = [suggestion.plan.text for suggestion in advice.suggestions]
    assert len(set(texts)) == len(texts)
    assert [text for text in texts if nest.check(text).verdict is not Verdict.LEGAL] == []
    assert all(suggestion.why for suggestion in advice.suggestions)


@pytest.mark.parametrize("name", LEFT)
def test_what_cannot_pay_is_left_with_the_reason(tmp_path, name):
    text, reason = LEFT[name]
    advice = nest_of(tmp_path, text).suggest(host=HOST)
    assert advice.suggestions == () and reason in advice.leave


def test_suggestions_do_not_change_from_call_to_call(tmp_path):
    nest = nest_of(tmp_path, NESTS["product"][0])
    assert nest.suggest(host=HOST) == nest.suggest(host=HOST)


# ---------------------------------------------------------------- the machine decides

@pytest.mark.parametrize("vector, registers, element",
                         [(16, 16, 8), (32, 16, 8), (32, 16, 4), (64, 32, 8), (16, 32, 4)])
def test_blocks_fit_into_the_registers(vector, registers, element):
    """The sums, one vector of a row and, with few registers, a spread number per row must have a register each (Goto &
    van de Geijn 2008, section 6; from memory)."""
    found = shapes(vector, registers, element)
    assert found
    for shape in found:
        assert shape.columns == shape.vectors * vector // element
        assert shape.rows * shape.vectors + (shape.rows if registers < 32 else 1) + (registers < 32) <= registers


def test_wide_vectors_get_rows_of_one_vector_first(tmp_path):
    """12 x 8 or 14 x 8 doubles with 64-byte vectors (common practice in hand-written products)."""
    first = nest_of(tmp_path, NESTS["product"][0]).suggest(host=host_with(64, 32)).suggestions[0].plan
    smallest = {term.loop: term.chunk for term in first.terms if term.chunk is not None}
    assert smallest["j"] == 8 and smallest["i"] in (12, 14)


def test_packed_parts_fit_where_the_reason_says(tmp_path):
    for second in (256 * KIB, 512 * KIB, 2048 * KIB):
        plan = nest_of(tmp_path, NESTS["product"][0]).suggest(host=host_with(32, 16, second=second)).suggestions[0].plan
        chunks = {f"{t.loop}{number}": t.chunk for number, t in enumerate(plan.terms) if t.chunk is not None}
        rows = max(chunk for name, chunk in chunks.items() if name[0] == "i")
        depth = max(chunk for name, chunk in chunks.items() if name[0] == "k")
        assert second // 4 < rows * depth * 8 <= second // 2


def test_small_sizes_need_no_chunks_larger_than_they_are(tmp_path):
    plan = nest_of(tmp_path, NESTS["product"][0]).suggest({"n": 50}, host=HOST).suggestions[0].plan
    assert all(term.chunk is None or term.chunk <= 64 for term in plan.terms)


def test_sweeps_that_fit_into_the_first_cache_are_not_cut(tmp_path):
    large = nest_of(tmp_path, NESTS["sweeps"][0])
    assert large.suggest({"n": 2000, "steps": 100}, host=HOST).suggestions
    assert [s for s in large.suggest({"n": 20, "steps": 100}, host=HOST).suggestions if s.kind == "time skewing"] == []


def test_an_unknown_machine_is_said_to_be_guessed(tmp_path):
    nothing = Host(UNKNOWN, UNKNOWN, UNKNOWN, (), UNKNOWN, (), UNKNOWN, UNKNOWN, UNKNOWN, UNKNOWN)
    advice = nest_of(tmp_path, NESTS["product"][0]).suggest({"n": 1000}, host=nothing)
    assert advice.suggestions and len(advice.assumed) == 2 and all("guessed" in text for text in advice.assumed)


def test_this_machine_has_numbers():
    machine = Machine.of(describe())
    assert machine.first <= machine.second <= machine.last
    assert machine.vector in (16, 32, 64, 128, 256) and machine.registers >= 8


@pytest.mark.parametrize("flags, machine, expected", [
    ("flags : fpu sse2 avx avx2", "x86_64", (32, 16)),
    ("flags : fpu sse2 avx avx2 avx512f", "x86_64", (64, 32)),
    ("flags : fpu sse2", "x86_64", (16, 16)),
    ("flags : fpu sse2", "i686", (16, 8)),
    ("Features : fp asimd", "aarch64", (16, 32)),
    ("flags : fpu", "x86_64", (None, None)),
    ("", "riscv64", (None, None)),
])
def test_vector_registers(flags, machine, expected):
    """Widths and numbers as in the manuals named beside the table: YMM 256 bits, ZMM 512 bits, V 128 bits."""
    assert tuple(fact.value for fact in vectors_of(flags, machine)) == expected


# ---------------------------------------------------------------- the second round

def test_neighbours_change_one_loop_are_legal_and_new(tmp_path):
    from retile.suggest import neighbours

    nest = nest_of(tmp_path, NESTS["product"][0])
    plan = nest.suggest({"n": 1000}, host=HOST).suggestions[0].plan
    tried = {plan.text}
    found = neighbours(nest.nest, nest.dependences, plan, tried, 12)
    assert len(found) == 12 and len({one.plan.text for one in found} - {plan.text}) == 12
    for one in found:
        assert nest.check(one.plan.text).verdict is Verdict.LEGAL
        pairs = list(zip(plan.terms, one.plan.terms, strict=True))
        assert len({a.loop for a, b in pairs if a.chunk != b.chunk}) == 1
        assert [term.form for term in one.plan.terms] == [term.form for term in plan.terms]
        assert len(one.plan.buffers) == len(plan.buffers)
    assert neighbours(nest.nest, nest.dependences, plan, tried, 12) != found


# ---------------------------------------------------------------- the command

BEAMS = f"samples_c/beamform.c:{line_of('beamform.c', 'form_beams')}"


def test_the_document_has_the_agreed_fields():
    done = retile("suggest", BEAMS, "--json", "--most", "3", "--set", "n=500")
    document = json.loads(done.out)
    assert (done.status, done.err) == (0, "")
    assert document["address"] == BEAMS and document["leave"] is None and len(document["plans"]) == 3
    for plan in document["plans"]:
        line = plan["plan"] + (f"; {plan['options']}" if plan["options"] else "")
        assert plan["why"] and retile("check", BEAMS, line).status == 0


def test_text_names_the_plans_and_the_next_command():
    done = retile("suggest", BEAMS)
    assert done.status == 0 and "unroll i" in done.out
    assert done.out.rstrip().endswith(f"Next: retile measure {BEAMS} --set n=1000")


def test_leaving_a_nest_is_an_answer_too():
    address = f"samples_c/depth_smooth.c:{line_of('depth_smooth.c', 'smooth_rows')}"
    done = retile("suggest", address)
    assert done.status == 0 and "Leave it: " in done.out
    document = json.loads(retile("suggest", address, "--json").out)
    assert document["plans"] == [] and document["leave"]


def test_a_refused_nest_is_refused():
    address = f"samples_c/first_return.c:{line_of('first_return.c', 'first_returns')}"
    done = retile("suggest", address, "--json")
    assert done.status == 1 and "break" in done.err and json.loads(done.out)["refusals"][0]["code"] == "break"


def test_an_unknown_size_is_a_wrong_call():
    done = retile("suggest", BEAMS, "--set", "q=3")
    assert (done.status, done.out) == (2, "") and "no size q; it has n" in done.err


def test_measure_without_plans_tries_suggested_ones_and_neighbours(tmp_path):
    address = f"samples_c/column_stats.c:{line_of('column_stats.c', 'remove_means')}"
    done = retile("measure", address, "--set", "pings=300", "--set", "beams=400", "--seconds", "0.2", "--json",
                  "-o", tmp_path / "result.json", seconds=300)
    document = json.loads(done.out)
    plans = [trial["plan"] for trial in document["trials"]]
    assert done.status == 0 and 3 <= len(plans) <= 25 and "ping beam" in plans
    assert all(trial["verified"] for trial in document["trials"]) and document["best"]["plan"] in plans


def test_options_of_plans_need_plans():
    done = retile("measure", BEAMS, "--set", "n=10", "--remainder", "peel")
    assert (done.status, done.out) == (2, "") and "name at least one PLAN" in done.err


def test_measure_without_plans_says_when_to_leave_a_nest(tmp_path):
    address = f"samples_c/depth_smooth.c:{line_of('depth_smooth.c', 'smooth_rows')}"
    names = [f"--set={parameter.text}=100" for parameter in open_file(str(SAMPLES / "depth_smooth.c")).nest(
        line_of("depth_smooth.c", "smooth_rows")).nest.parameters]
    done = retile("measure", address, *names, cwd=SAMPLES.parent)
    assert done.status == 0 and "Leave it: " in done.out and not list(tmp_path.iterdir())

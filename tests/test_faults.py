"""Deliberate faults of the program, each with the check that notices it.

A fault is switched on by putting a wrong function in place of one of the program's.  What follows goes through the same
stages as for a user: verdict, loop tree with its two questions, C text.  ``verdict`` says
that the plan is not legal, as it is without the fault; ``questions`` that the finished tree was
turned down before any C existed; ``run`` that the compiled variant did not leave what the original leaves, in windows
of one buffer at several distances.  Without a fault no case gets that far.  ``pytest -s`` prints the table.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
import rewriting
from rewriting import case_of, compile_and_run, together

from retile import plan as planning
from retile.affine import map_bound
from retile.plan import verdict
from retile.rewrite import ahead, assumed, chunks, constants, loops, printer, variant
from retile.rewrite.layout import InternalError
from retile.tree import Guard, Loop, Role, children
from retile.values import replace as changed

HEAD = "void survey(int n, int m, int (*to)[16], const int *from)\n{\n"
ROWS = "for (int i = 0; i < n; i++)\n for (int j = 0; j < m; j++)\n  "
NESTS = {
    "plain": ROWS + "to[i][j] = (to[i][j] & 255) * 3 + from[j] % 9 + i;\n",
    "flow": ROWS.replace("i = 0", "i = 1") + "to[i][j] = (to[i - 1][j + 1] & 255) * 3 + 1;\n",
    "anti": ROWS.replace("j = 0", "j = 1") + "to[i][j] = (to[i + 1][j - 1] & 255) * 3 + 1;\n",
    "output": ROWS + "to[i + j][0] = i * 3 + 1;\n",
    "guarded": ROWS.replace("\n for", "\n if (i < 3 || i > 5)\n for") + "to[i][j] = i + 2 * j;\n",
    "down": ROWS.replace("i = 0; i < n; i++", "i = n; i >= 0; i--") + "to[i][j] = (to[i + 1][j] & 255) * 3 + 1;\n",
    "live": "int i, j;\n" + ROWS.replace("int ", "").replace("j = 0", "j = i") + "to[i][j] = i + j;\nto[15][14] = i;\nto[15][15] = n > 0 ? j : 0;\n",
    "waiting": "int s;\nfor (int i = 0; i < n; i++) {\n s = 0;\n for (int k = 0; k < m; k++)\n  s = (s & 255) * 3 + k + i;\n"
               " to[i][0] = s;\n}\n",
    "held": ROWS.replace("j < m", "j < from[1] && j < m") + "to[i][j] = 1 + i;\n",
    "narrow": "unsigned char last = m == 15 ? 255 : m;\nfor (unsigned char i = 0; i < last; i++)\n"
              " to[i][0] = (to[i][0] & 255) * 3 + 1;\n",
    "narrow strides": "unsigned char last = m == 15 ? 253 : m;\nfor (unsigned char i = 0; i <= last; i += 2)\n"
                      " to[i][0] = (to[i][0] & 255) * 3 + 1;\n",
    "strides": "for (int i = 0; i < n; i += 3)\n to[i][0] = (to[i][0] & 255) * 3 + 1;\n",
    "loose": "unsigned long end = m == 15 ? 0x4000000000000000u : m;\nfor (int i = 0; i < n; i++)\n"
             " for (unsigned long j = 0; j < end && j < (unsigned)n; j++)\n  to[j][0] = from[j + i] % 100 + 1;\n",
}
MAIN = """
#include <unistd.h>
#define K_FOUR 4
static int one[6000], two[6000];
int main(void) {
    static const int away[] = { -600, -17, -1, 0, 1, 5, 17, 600 };
    alarm(5);
    for (int at = 0; at < 11 * 11 * 8; at++) {
        int n = at % 11, m = at / 11 % 11, shift = away[at / 121];
        n = n == 10 ? 15 : n; m = m == 10 ? 15 : m;
        for (int k = 0; k < 6000; k++)
            one[k] = two[k] = k * 7 % 13;
        original(n, m, (void *)(one + 640), one + 640 + shift);
        variant0(n, m, (void *)(two + 640), two + 640 + shift);
        if (memcmp(one, two, sizeof one)) { printf("differ: %d %d %d\\n", n, m, shift); return 1; }
    }
    AHEAD
    return 0;
}
"""


@dataclass(frozen=True)
class Fault:
    nest: str
    plan: str
    caught_by: str  # ``questions`` or ``run``
    owner: Any
    name: str
    wrong: Callable[[Any], Any]  # from the right function to the wrong one


def of_tree(change: Callable[[Any], Any]) -> Callable[[Any], Any]:
    """A wrong maker of trees: every node of a right tree changed."""
    def walk(nodes: tuple[Any, ...]) -> tuple[Any, ...]:
        found: list[Any] = []
        for node in nodes:
            new = change(node)
            for one in new if isinstance(new, tuple) else (new,):
                inner = walk(children(one)) if isinstance(one, Loop | Guard) else ()
                found.append(changed(one, body=inner) if inner else one)
        return tuple(found)
    return lambda right: lambda *given, **named: walk(right(*given, **named))


def loops_of_role(role: Role, change: Callable[[Loop], Any]) -> Callable[[Any], Any]:
    return of_tree(lambda node: change(node) if isinstance(node, Loop) and node.role is role else node)


def without_edges(kind: str) -> Callable[[Any], Any]:
    def wrong(right: Any) -> Any:
        def analysed(*given: Any) -> Any:
            found = right(*given)
            return changed(found, edges=tuple(edge for edge in found.edges if edge.kind != kind))
        return analysed
    return wrong


def instead(value: Any) -> Callable[[Any], Any]:
    return lambda right: lambda *given, **named: value


ELEMENT, CHUNK = Role.ELEMENT, Role.CHUNK
FAULTS = {
    "a dropped remainder": Fault("plain", "j:4 i j", "questions", planning, "build_tree", loops_of_role(
        CHUNK, lambda loop: changed(loop, upper=map_bound(loop.upper, lambda form: form - 3)))),
    "a bound off by one": Fault("plain", "j:4 i j", "questions", planning, "build_tree", loops_of_role(
        ELEMENT, lambda loop: changed(loop, upper=map_bound(loop.upper, lambda form: form - 1)))),
    "a wrong first value of a chunk": Fault("plain", "j:4 i j", "questions", planning, "build_tree", loops_of_role(
        ELEMENT, lambda loop: changed(loop, lower=map_bound(loop.lower, lambda form: form + 1)))),
    "a wrong origin of chunks": Fault("plain", "j:4 i j", "questions", planning, "build_tree", loops_of_role(
        CHUNK, lambda loop: changed(loop, origin=loop.origin + 1))),
    "a chunk that runs twice": Fault("plain", "j:4 i j", "questions", planning, "build_tree", loops_of_role(
        ELEMENT, lambda loop: (loop, loop))),
    "a condition left out": Fault("guarded", "j i", "questions", planning, "build_tree", of_tree(
        lambda node: node.body if isinstance(node, Guard) else node)),
    "a wrong sign for a loop that counts down": Fault("down", "j:4 i j", "questions", planning, "build_tree", of_tree(
        lambda node: changed(node, step=-node.step) if isinstance(node, Loop) and node.step < 0 else node)),
    "a legality that finds nothing": Fault("flow", "j i", "questions", verdict._Court, "reversed", instead(None)),
    "no flow edges": Fault("flow", "j i", "run", rewriting, "analyse", without_edges("flow")),
    "no anti edges": Fault("anti", "j i", "run", rewriting, "analyse", without_edges("anti")),
    "no output edges": Fault("output", "j i", "run", rewriting, "analyse", without_edges("output")),
    "a forgotten assumption": Fault("plain", "j i", "run", verdict._Court, "needed_assumptions", instead(())),
    "a test of overlap left out": Fault("plain", "j i", "run", assumed._Ranges, "apart", instead("1")),
    "ranges one element short": Fault("plain", "j i", "run", assumed, "touched", lambda right: lambda *given: changed(
        found := right(*given), highs=tuple(high - 1 for high in found.highs))),
    "a bound in memory taken for fixed": Fault("held", "j i", "run", assumed, "_apart", lambda right: lambda one:
                                               right(one) and one.code.value != "unchanged"),
    "a range that may wrap": Fault("loose", "j i", "run", assumed, "reached", instead(True)),
    "a lost last value": Fault("live", "i:4 j i", "run", variant, "restored", lambda right: lambda *given: changed(
        right(*given), behind=[])),
    "a narrow chunk variable": Fault("narrow", "i:8 i", "run", loops.Elements, "_wide_enough", lambda right: lambda self, loop,
                                     scope, type, starts, shift: type),
    "a start beyond the type": Fault("narrow strides", "i:40 i:7 i", "run", loops.Elements, "_keep_out", instead("")),
    "an inclusive end taken for half-open": Fault("plain", "j:4 i j", "run", chunks, "half_open",
                                                  lambda right: lambda form, upward, shift: form),
    "the larger end for the smaller": Fault("plain", "j:4 i j", "run", loops.Elements, "_chosen_of", lambda right:
                                            lambda self, a, b, kind, *rest: right(self, b, a, kind, *rest).__class__(
                                                right(self, a, b, kind, *rest).text.replace(" < ", " > "),
                                                right(self, a, b, kind, *rest).type)),
    "a comparison that lets one more in": Fault("plain", "j:4 i j", "run", loops.Elements, "_test", lambda right:
                                                lambda *given: right(*given).replace(" < ", " <= ")),
    "a named chunk's step without the stride": Fault("strides", "i:K_FOUR i", "run", constants.Constants, "length",
                                                     lambda right: lambda self, constant, steps: self.names[constant]),
    "the wrong cell of a kept value": Fault("waiting", "i:4 k:3 i k", "run", printer.Printer, "_copy", lambda right:
                                            lambda *given: right(*given).replace("i - ", "0 * ")),
    "memory read ahead": Fault("held", "j i", "run", ahead.Ahead, "needed", instead(())),
}


def outcome(fault: Fault, folder: Path) -> str:
    """Which check notices; empty if none does."""
    text = HEAD + NESTS[fault.nest] + "}\n"
    try:
        made = case_of(folder, "#define K_FOUR 4\n" + text).variant(fault.plan)
    except InternalError:
        return "questions"
    except AssertionError:
        return "verdict"
    main = MAIN.replace("AHEAD", "original(0, 3, (void *)one, NULL); variant0(0, 3, (void *)two, NULL);" if fault.nest == "held" else "")
    body = made.text.replace("#define K_FOUR 4\n", "")
    try:
        compile_and_run(folder, "#define K_FOUR 4\n" + together(text, [body], main), warnings=("-std=gnu11", "-w"), flags=(),
                        optimize="-O0")
    except AssertionError as error:
        assert "error: " not in str(error), error  # that it does not compile is no proof
        return "run"
    return ""


@pytest.mark.parametrize("name", FAULTS)
def test_a_deliberate_fault_is_noticed(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    fault = FAULTS[name]
    assert outcome(fault, tmp_path) in ("", "verdict")
    wrong = fault.wrong(getattr(fault.owner, fault.name))
    monkeypatch.setattr(fault.owner, fault.name, wrong)
    found = outcome(fault, tmp_path)
    print(f"{name:45} {fault.caught_by:10} {found}")
    assert found == fault.caught_by

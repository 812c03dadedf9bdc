"""Iterations that threads share: ``threads at i:96``.

The loop of the term gets an OpenMP directive (OpenMP API 4.5, 2.7.1).  That needs more than a legal order: no dependence at all
may run between two of its iterations, in either direction, also none between updates whose order is free, since two at
once would lose one.  Every thread computes what the original does in the original order, so that results are the same
for any number of threads.

Storage of the variant's own inside the loop is local to an iteration, and so must fit a thread's stack.
"""

from __future__ import annotations

from collections.abc import Iterator

from ..model import Nest, Plan, Refusal, ScalarClass, StorageKind

# What an iteration may put on the stack of its thread, in bytes, in all.
MOST_ON_A_STACK = 1 << 20


def within_threads(plan: Plan, level: int) -> bool:
    """True if storage in the loops of the terms before a level belongs to one iteration of the threaded loop."""
    return plan.threaded is not None and level > plan.threaded


def refusals(nest: Nest, plan: Plan) -> Iterator[Refusal]:
    """What keeps threads from sharing a loop, whatever the order."""
    if plan.threaded is None:
        return
    first = nest.statements[0]
    local = sum(buffer.cells * (nest.storage(buffer.storage).element_bytes or 8) for buffer in plan.buffers
                if within_threads(plan, buffer.level))
    if local > MOST_ON_A_STACK:
        yield Refusal(first.line, first.span.column, "threads", f"each thread would need {local} bytes of its own on its stack; "
                      "pack further out or in smaller chunks")
    for storage in nest.storages:
        if storage.kind is StorageKind.SCALAR and storage.scalar is ScalarClass.PRIVATE and storage.live_after:
            yield Refusal(first.line, first.span.column, "threads", f"the value of '{storage.name}' is used after the nest, and "
                          "which thread had the last one is not known")

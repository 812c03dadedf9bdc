"""Values that travel: a scalar computed between two loops, computed again wherever a plan needs it.

    for (i) { t = w[i] * gain;  for (j) c[i][j] += t * b[j]; }        plan  j:64 i j

The chunks of ``j`` take the iterations of ``i`` apart, so ``t`` is computed again for each chunk:

    for (j_from) for (i) { t = w[i] * gain;  for (j) ... }

That is safe if nothing in the nest writes what the statement reads, it writes nothing but scalars like this, and nobody looks at
the scalar afterwards (rematerialization: Briggs, Cooper & Torczon, "Rematerialization", 1992).
"""

from __future__ import annotations

from collections import Counter

from ..model import Nest, Plan, ScalarClass, Statement, Storage
from .schedule import stays_whole


def copied(nest: Nest, plan: Plan) -> tuple[str, ...]:
    """Ids of the statements that the plan runs more than once, because it takes apart the iterations they belong to."""
    found = Counter(statement.id for storage in nest.storages
                    if storage.scalar is ScalarClass.PRIVATE and not stays_whole(plan, storage, nest)
                    for statement in (_only_writer(storage, nest),) if statement is not None)
    # Each scalar that it writes must be free to be written again.
    return tuple(id for id, count in found.items() if count == sum(a.write for a in nest.statement(id).accesses))


def copied_scalars(nest: Nest, plan: Plan) -> frozenset[str]:
    """Names of the scalars that these statements compute."""
    return frozenset(access.storage for id in plan.copied for access in nest.statement(id).accesses if access.write)


def _only_writer(storage: Storage, nest: Nest) -> Statement | None:
    """The statement that computes a scalar for all its readers and may do so again; None if there is no such one."""
    if storage.live_after:
        return None
    users = [s for s in nest.statements if any(a.storage == storage.name for a in s.accesses)]
    writers = [s for s in users if any(a.storage == storage.name and a.write for a in s.accesses)]
    if len(writers) != 1:
        return None
    writer = writers[0]
    # ``int now = t % 2, next = 1 - now;`` reads what it has just written
    written = {a.storage for s in nest.statements if s != writer for a in s.accesses if a.write}
    own = {a.storage for a in writer.accesses if a.write}
    pure = all(a.certain and (_is_its_own(nest.storage(a.storage), storage) if a.storage in own else a.storage not in written)
               for a in writer.accesses)
    surrounds = writer.loops == storage.private_to and all(
        s.span.start > writer.span.start and s.loops[:len(writer.loops)] == writer.loops for s in users if s != writer)
    return writer if pure and surrounds else None


def _is_its_own(written: Storage, storage: Storage) -> bool:
    """True if the statement may compute this scalar again too: ``double *up = ..., *down = ...`` is one statement."""
    return written.scalar is ScalarClass.PRIVATE and not written.live_after and written.private_to == storage.private_to

"""Which outputs may round differently when updates run in another order, and by how much.

A plan with ``reassociate yes`` adds the same terms in another order.  How far two orders lie apart depends on the data,
so the distance is measured, not guessed: original and variant also run rounded downward and rounded upward (IEEE 754,
4.3.2).  Both roundings enclose the exact sum of the terms (R. E. Moore, "Interval Analysis", 1966), whatever the order, so
for terms that are exact the two results lie at most the two widths apart.  Where terms round too, or where sums are used
further on, this is an estimate; hence ``WIDTHS``.  The rules, for the numbers of one array:

    allowed = WIDTHS * (widest spread of the original + widest spread of the variant) + STEPS * eps * largest
    allowed is never above sqrt(eps) * max(1, largest)

where ``largest`` is the largest magnitude that the array held before or after, and eps the step of its type at 1.  What
an omitted or doubled term does is greater by orders of magnitude: data are filled with values around 1.  Growth of the
bound with the number of terms: N. J. Higham, "Accuracy and Stability of Numerical Algorithms", 2nd edition, 2002, 4.2.
"""

from __future__ import annotations

from ..model import CType, Nest, Plan, Storage

WIDTHS = 4  # the rule for exact terms needs 1
STEPS = 4  # where nothing is spread: the last bits


def inexact_outputs(nest: Nest, plan: Plan) -> tuple[str, ...]:
    """Names of the floating-point storages that a plan may leave with other last bits; none without ``reassociate yes``.

    These are the storages that an inexact update changes and all that is computed from them; integers never are.
    """
    if dict(plan.options).get("reassociate") != "yes":
        return ()
    touched = {
        access.storage
        for statement in nest.statements
        for access in statement.accesses
        if access.write and access.update and not access.exact_update and _is_floating(nest.storage(access.storage))
    }
    while True:
        using = [s for s in nest.statements if any(a.storage in touched and not a.write for a in s.accesses)]
        decides = any(all(not access.write for access in s.accesses) for s in using)  # a condition on such a value
        more = {
            access.storage
            for statement in (nest.statements if decides else using)
            for access in statement.accesses
            if access.write and _is_floating(nest.storage(access.storage))
        }
        if more <= touched:
            return tuple(sorted(touched))
        touched |= more


def _is_floating(storage: Storage) -> bool:
    return isinstance(storage.element, CType) and storage.element.floating

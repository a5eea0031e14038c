"""Joint answers that a class never gives: ``P(fees=yes, accounts=yes | managed) = 0``.

Exact where the items are answered together in that class: given the first item's answer, the
others' joint answers have a block of their own, in which one is known to be 0.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence

from bayeslca.model.answered_together import ItemSet
from bayeslca.model.places import ConditionalVector, Link, Place
from bayeslca.model.statements.resolved import ResponseTerm
from bayeslca.model.statements.statement_errors import Refusal
from bayeslca.model.statements.vocabulary import Vocabulary


def joint_zero_links(
    term: ResponseTerm,
    vocabulary: Vocabulary,
    free_items: Collection[int],
    item_sets: Sequence[ItemSet],
    text: str,
) -> Iterator[Link]:
    """Return what must be 0 given the first item's answer, for joint answers to be 0.

    Raises
    ------
    Refusal
        Where the items are not answered together in a class that is meant, or all of the first
        item's answers are ruled out.
    """
    answers = dict(term.answers)
    names = [vocabulary.items[j].name for j in answers]
    found = next((s for s, one in enumerate(item_sets) if answers.keys() <= set(one.items)), None)
    every = range(vocabulary.n_classes)
    meant = every if term.latent_class is None else (term.latent_class,)
    if found is None or not item_sets[found].classes.issuperset(meant):
        msg = (
            f"{' and '.join(names)} are independent within a class here, so their joint answers "
            "are impossible only where one of the answers is"
        )
        remedy = (
            "Set one answer's own probability to 0, or let the items go together: "
            f"answered_together=[{names}]."
        )
        raise Refusal(msg, 0, remedy)
    one = item_sets[found]
    ruled_out = [
        at
        for at, rest in enumerate(one.rest)
        if all(c in answers.get(j, (c,)) for j, c in zip(one.others, rest, strict=True))
    ]
    for g in _groups(term, vocabulary, one.first in free_items):
        for k in meant:
            for a in answers.get(one.first, tuple(range(one.sizes[0]))):
                for at in ruled_out:
                    place = Place(ConditionalVector(g, found, k, a), at)
                    yield Link(place, "=", 0.0, text)


def _groups(term: ResponseTerm, vocabulary: Vocabulary, free: bool) -> Sequence[int]:
    if isinstance(term.group, int):
        if not free:
            msg = "all groups share the probabilities of these items"
            raise Refusal(msg, 0, "Leave the group out, or let the items differ: free_by_group.")
        return (term.group,)
    return range(vocabulary.n_groups if free else 1)

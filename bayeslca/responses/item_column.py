"""From a column of texts to an item with category codes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from bayeslca._typing import Ints
from bayeslca.exceptions import ResponsesError, near_names
from bayeslca.findings import Finding
from bayeslca.responses.category_order import infer_yes, order_categories, same_meaning
from bayeslca.responses.item import Item, ItemSpec
from bayeslca.responses.no_answers import says_no_answer, undeclared_no_answers
from bayeslca.responses.problems import Problems, listed_with_counts
from bayeslca.responses.raw_table import RawColumn, RawTable
from bayeslca.responses.spelling import (
    cleanest,
    find_value,
    merge_remedy,
    number_of,
    spelling_variants,
)
from bayeslca.responses.units import MISSING

MOST_CATEGORIES = 64
MOST_NUMBERS = 20
"""A column of more distinct numbers than this is taken for a measurement."""
SPARSE = 5
"""A category that fewer cases chose is named in a finding."""


@dataclass
class ItemColumn:
    """One item on its way from column to codes.

    Attributes
    ----------
    table : RawTable
    column : RawColumn
        The column, with the rows that are kept.
    rows : ndarray of int, shape (kept row,)
        Position of each kept row in the table.
    weights : ndarray of int64, shape (kept row,)
        Cases per row.
    spec : ItemSpec
    known : Item or None
        The item of a fitted model that the column must agree with.
    problems : Problems
    findings : list of Finding
    inferred_yes : bool
        True once the answer that counts as yes was taken from the answers themselves.
    """

    table: RawTable
    column: RawColumn
    rows: Ints
    weights: Ints
    spec: ItemSpec
    known: Item | None
    problems: Problems
    findings: list[Finding] = field(default_factory=list)
    inferred_yes: bool = False

    def read(self) -> tuple[Item, Ints] | None:
        """Return the item and its codes, shape (kept row,); None after a problem."""
        n_before = len(self.problems.messages)
        if self._looks_like_no_item():
            return None
        name_of = self._answers()
        if name_of is None:
            return None
        counts = self._counts(name_of)
        item = self._item(name_of, counts)
        if item is None or len(self.problems.messages) > n_before:
            return None
        code = {category: i for i, category in enumerate(item.categories)}
        # Answers by value; the last entry answers code -1.
        by_value = [code.get(name_of.get(value, ""), MISSING) for value in self.column.values]
        codes = np.array([*by_value, MISSING], dtype=np.int16)[self.column.codes]
        self._find_sparse(item, codes)
        return item, codes

    def _problem(self, message: str) -> None:
        self.problems.add(f"item {self.spec.name!r}: {message}")

    def _note(self, kind: str, message: str, remedy: str = "", value: float | None = None) -> None:
        self.findings.append(Finding(kind, "note", message, remedy, (self.spec.name,), value))

    def _looks_like_no_item(self) -> bool:
        """Refuse ids and measurements before looking at every value of them."""
        if self.known is not None:
            return False
        counts = self.column.counts()
        n = len(counts)
        if n > MOST_CATEGORIES:
            what = "a measurement" if all(map(_is_number, counts)) else "an id or free text"
            shown = ", ".join(map(repr, list(counts)[:3]))
            self._problem(
                f"has {n:,} different values (such as {shown}); an item has "
                f"at most {MOST_CATEGORIES} categories, so this is probably {what}. Take "
                "it off the items (an id is given as case=), or group it into fewer categories."
            )
            return True
        if (
            self.spec.categories is None
            and self.column.type == "date"
            and n > 2  # a date is no answer to choose from
        ):
            self._problem(
                f"holds dates ({', '.join(list(counts)[:3])}). Take it off the items, or group the "
                "dates into categories first."
            )
            return True
        return False

    def _answers(self) -> dict[str, str] | None:
        """Return the answer that each value stands for; values of 'no answer' are left out."""
        present = self.column.counts()
        named = {value: self.column.labels.get(value, value) for value in present}
        for wanted in self.spec.no_answer:
            for value in find_value(wanted, named):
                named.pop(value)
        taken = self._merges(named)
        if taken is None or not self._labels_distinct(named, taken):
            return None
        return named | taken

    def _merges(self, named: dict[str, str]) -> dict[str, str] | None:
        """Return the answer that each merged value goes into."""
        taken: dict[str, str] = {}
        for kept, spellings in self.spec.merge.items():
            into: dict[str, int] = {}
            for spelling in spellings:
                for value in find_value(spelling, named):
                    if taken.get(value, kept) != kept:
                        self._problem(
                            f"merge puts {spelling!r} into {taken[value]!r} and into {kept!r}. "
                            "Name it once."
                        )
                        return None
                    taken[value] = kept
                    if named[value] != kept:
                        into[named[value]] = into.get(named[value], 0) + self._n(value)
            if into:
                self._note(
                    "merged_answers",
                    f"Item {self.spec.name!r}: {listed_with_counts(into)} counted as {kept!r}, as "
                    "merge says.",
                    value=float(sum(into.values())),
                )
        return taken

    def _labels_distinct(self, named: Mapping[str, str], taken: Mapping[str, str]) -> bool:
        by_name: dict[str, list[str]] = {}
        for value, name in named.items():
            if value not in taken:
                by_name.setdefault(name, []).append(value)
        double = {name: values for name, values in by_name.items() if len(values) > 1}
        for name, values in double.items():
            codes = ", ".join(repr(value) for value in values)
            self._problem(
                f"the codes {codes} have the same name {name!r}. If they are one answer, say so: "
                f"{merge_remedy(name, values)}; else give them labels of their own in the file."
            )
        return not double

    def _n(self, value: str) -> int:
        """Cases with a value."""
        return int(self.weights[self.column.rows_with(value)].sum())

    def _counts(self, name_of: Mapping[str, str]) -> dict[str, int]:
        counts: dict[str, int] = {}
        by_value = np.zeros(len(self.column.values) + 1, dtype=np.int64)
        np.add.at(by_value, self.column.codes, self.weights)
        for value, n in zip(self.column.values, by_value[:-1].tolist(), strict=True):
            if value in name_of:
                counts[name_of[value]] = counts.get(name_of[value], 0) + n
        return counts

    def _place(self, names: Sequence[str], name_of: Mapping[str, str]) -> str:
        wanted = [name_of.get(value) in names for value in self.column.values]
        found = np.flatnonzero(np.array([*wanted, False])[self.column.codes])
        return self.table.place(self.rows[found])

    def _item(self, name_of: Mapping[str, str], counts: dict[str, int]) -> Item | None:
        given = self.known.categories if self.known else self.spec.categories
        if given is not None:
            return self._item_of_given(tuple(given), name_of, counts)
        if not counts:
            self._problem("has no answer in any row. Take it off the items.")
            return None
        asked = (self._variants(counts), self._undeclared(name_of, counts))
        if any(asked):
            return None
        if len(counts) == 1:
            only, n = next(iter(counts.items()))
            self._problem(
                f"has one category, {only!r} ({n:,} case{'s' * (n != 1)}), so it cannot "
                "tell cases apart. Take it off the items, or give all its possible answers as "
                "categories."
            )
            return None
        if self.column.type != "text" or all(map(_is_number, counts)):
            fractions = sum(not name.lstrip("+-").isdigit() for name in counts)
            numbers = all(map(_is_number, counts))
            if numbers and (len(counts) > MOST_NUMBERS or fractions > MOST_NUMBERS // 2):
                self._problem(
                    f"holds {len(counts)} different numbers (such as "
                    f"{', '.join(list(counts)[:4])}), so it is probably a measurement. Take it off "
                    "the items, group it into a few categories first, or list them as categories."
                )
                return None
        return self._item_of_found(name_of, counts)

    def _item_of_given(
        self, given: tuple[str, ...], name_of: Mapping[str, str], counts: dict[str, int]
    ) -> Item | None:
        unseen = {name: n for name, n in counts.items() if name not in given}
        if unseen:
            related = [name for name in (*given, *unseen)]
            if any(set(same) & set(unseen) for same in spelling_variants(related)):
                self._variants(dict.fromkeys(given, 0) | counts, expected=given)
                unseen = {
                    name: n
                    for name, n in unseen.items()
                    if not any(name in same for same in spelling_variants(related))
                }
        if unseen:
            codes = [value for value, name in name_of.items() if name in unseen]
            by_label = set(codes) & set(given)
            remedy = (
                f"The file names its codes by labels; give the labels: {list(counts)}."
                if by_label
                else "Correct them, name them in merge, declare them in no_answer, or add them to "
                "categories."
            )
            if self.known:
                remedy = (
                    "The model was fitted to the categories above and knows no others: correct "
                    "them, merge them, or declare them in no_answer."
                )
            near = near_names(next(iter(unseen)), given)
            self._problem(
                f"found {listed_with_counts(unseen)} in {self._place(list(unseen), name_of)}, not "
                f"among its categories {', '.join(map(repr, given))}{near}. {remedy}"
            )
            return None
        if self.known:
            return self.known
        if not counts:
            self._problem("has no answer in any row. Take it off the items.")
            return None
        return self._checked_item(given, self.spec.ordered)

    def _item_of_found(self, name_of: Mapping[str, str], counts: Mapping[str, int]) -> Item | None:
        labels = self.column.labels
        in_data = tuple(
            dict.fromkeys(
                name_of.get(value, labels.get(value, value)) for value in self.column.order
            )
        )
        order = order_categories(counts, in_data)
        ordered = self.spec.ordered or self.column.ordered
        if order.rule == "alphabet" and len(counts) > 2:
            if self.spec.ordered:
                self._problem(
                    f"is marked as ordered, but nothing says in which order "
                    f"{', '.join(map(repr, order.categories))} stand. Give them in order as "
                    "categories."
                )
                return None
            self._note(
                "alphabetical_categories",
                f"Item {self.spec.name!r}: the categories stand in alphabetical order "
                f"({', '.join(order.categories)}); nothing in the data says another.",
                "Give categories in the order you want.",
            )
        same = same_meaning(list(counts))
        if same:
            words = "; ".join(f"{', '.join(others)} and {kept}" for kept, others in same.items())
            self.findings.append(
                Finding(
                    "answers_of_one_meaning",
                    "warning",
                    f"Item {self.spec.name!r}: some categories look like one answer in other "
                    f"words ({words}).",
                    "If they are, name them in merge.",
                    (self.spec.name,),
                )
            )
        present = self.column.counts()
        unused = [
            label
            for code, label in labels.items()
            if code not in present
            and label not in counts
            and code not in self.column.declared_missing
            and not says_no_answer(label)
        ]
        if unused:
            self._note(
                "labelled_answers_not_chosen",
                f"Item {self.spec.name!r}: nobody chose {', '.join(map(repr, unused))}, which the "
                "file labels; left out of the categories.",
                "List all answers under categories to keep them in.",
            )
        return self._checked_item(order.categories, ordered)

    def _checked_item(self, categories: tuple[str, ...], ordered: bool) -> Item | None:
        yes = self.spec.yes
        if yes is None:
            yes = infer_yes(categories)
            self.inferred_yes = yes is not None
        try:
            return Item(
                self.spec.name, categories, self.spec.label or self.column.label, ordered, yes
            )
        except ResponsesError as error:
            self.problems.add(str(error))
            return None

    def _variants(self, counts: dict[str, int], expected: Sequence[str] = ()) -> bool:
        """Ask about answers that differ only in spelling."""
        found = [same for same in spelling_variants(counts) if not set(same) <= set(expected)]
        for same in found:
            kept = next((n for n in same if n in expected), cleanest(same, counts))
            others = [name for name in same if name != kept]
            spelled = {n: counts[n] for n in sorted(same, key=lambda n: -counts[n])}
            self._problem(
                f"{listed_with_counts(spelled)} differ only in case, spaces, accents or number "
                f"format. If they are one answer, say so: {merge_remedy(kept, others)}."
            )
        return bool(found)

    def _undeclared(self, name_of: Mapping[str, str], counts: Mapping[str, int]) -> bool:
        """Ask about answers that look like 'no answer'."""
        suspects = undeclared_no_answers(dict(name_of))
        if not suspects:
            return False
        found = {name: counts[name] for name in suspects}
        answers = [name for name in counts if name not in suspects]
        for same in spelling_variants(answers):
            answers = [
                name for name in answers if name not in same or name == cleanest(same, counts)
            ]
        kept = order_categories(answers).categories
        named = ", ".join(repr(name) for name in suspects)
        self._problem(
            f"{listed_with_counts(found)} in {self._place(suspects, name_of)} "
            f"look{'s' * (len(found) == 1)} like no answer. If so, declare it: "
            f"no_answer = [{named}]; if it is an answer, list it with the others: categories = "
            f"{[*kept, *suspects]!r}."
        )
        return True

    def _find_sparse(self, item: Item, codes: Ints) -> None:
        if self.known:
            return
        found = np.zeros(item.n_categories + 1, dtype=np.int64)
        np.add.at(found, codes, self.weights)
        sparse = {
            name: int(n) for name, n in zip(item.categories, found[:-1], strict=True) if n < SPARSE
        }
        if sparse:
            self._note(
                "sparse_category",
                f"Item {self.spec.name!r}: few cases chose {listed_with_counts(sparse)}; the prior "
                "weighs much there.",
                "Merge it with a neighbouring answer if the question allows."
                if item.n_categories > 2
                else "State what is known of it, or leave the item out.",
                value=float(min(sparse.values())),
            )
        if self.column.declared_missing:
            declared = {
                self.column.labels.get(value, value): n
                for value, n in self.column.declared_missing.items()
            }
            self._note(
                "declared_missing",
                f"Item {self.spec.name!r}: {listed_with_counts(declared)} read as no answer, "
                f"because the file declares {'it' if len(declared) == 1 else 'them'} missing.",
            )


def _is_number(text: str) -> bool:
    return number_of(text) is not None


def keep_rows(column: RawColumn, rows: Ints) -> RawColumn:
    """Return the column with some of its rows."""
    return replace(column, codes=column.codes[rows])

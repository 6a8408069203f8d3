"""Filters to choose from, single or stacked in pairs, without an object for each of half a million pairs."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from codesign.catalog import Filter

#: Between the ids of two stacked filters; no id holds blanks.
JOINT = " + "


class FilterChoices(Sequence[Filter]):
    """A sequence of filters, each one or two of a few base filters; pairs become `Filter` objects when looked at.

    Parameters
    ----------
    base : sequence of Filter
    members : (F, 2) int array
        Positions among ``base`` of what each choice is made of; the second is −1 for a single filter.
    """

    def __init__(self, base: Sequence[Filter], members: NDArray[np.intp]) -> None:
        self.base = tuple(base)
        self.members = np.asarray(members, dtype=np.intp).reshape(-1, 2)
        self.members.setflags(write=False)

    @classmethod
    def of(cls, filters: Sequence[Filter]) -> FilterChoices:
        """Any sequence of filters in this form."""
        if isinstance(filters, cls):
            return filters
        index = np.arange(len(filters))
        return cls(filters, np.stack([index, np.full_like(index, -1)], axis=1))

    def __len__(self) -> int:
        return len(self.members)

    def __getitem__(self, index):
        if isinstance(index, slice):
            return FilterChoices(self.base, self.members[index])
        first, second = self.members[index]
        return self.base[first] if second < 0 else _joined(self.base[first], self.base[second])

    def __iter__(self) -> Iterator[Filter]:
        return (self[index] for index in range(len(self)))

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Sequence):
            return NotImplemented
        return len(self) == len(other) and all(a == b for a, b in zip(self, other, strict=True))

    __hash__ = None

    @cached_property
    def _position(self) -> dict[tuple[int, int], int]:
        return {(int(a), int(b)): index for index, (a, b) in enumerate(self.members)}

    def find(self, name: str) -> Filter | None:
        """Return the choice of that name, the two of a pair in either order, or None."""
        known = {part.id: index for index, part in enumerate(self.base)}
        ids = [known.get(part) for part in name.split(JOINT)]
        if None in ids or len(ids) > 2:
            return None
        pair = (ids[0], -1) if len(ids) == 1 else (ids[0], ids[1])
        found = self._position.get(pair, self._position.get((pair[1], pair[0])))
        return None if found is None else self[found]

    def containing(self, names: Sequence[str]) -> FilterChoices:
        """Choices that hold all the filters named."""
        keep = np.ones(len(self), dtype=bool)
        for name in names:
            own = [i for i, part in enumerate(self.base) if part.id == name or name in (part.parts or ())]
            keep &= np.isin(self.members, own).any(axis=1)
        return FilterChoices(self.base, self.members[keep])


def with_pairs(filters: Sequence[Filter], stackable: Sequence[Filter]) -> FilterChoices:
    """All single filters, then every unordered pair of the stackable ones."""
    singles = FilterChoices.of(tuple(filters))
    chosen = {part.id for part in stackable if part.kind != "none"}
    own = np.array([i for i, part in enumerate(singles.base) if part.id in chosen], dtype=np.intp)
    first, second = np.triu_indices(own.size, 1)
    return FilterChoices(singles.base, np.concatenate([singles.members, np.stack([own[first], own[second]], axis=1)]))


def _joined(first: Filter, second: Filter) -> Filter:
    """Two filters as one stack; made without validation, whose rules for ids a pair cannot follow."""
    prices = (first.price, second.price)
    return Filter.model_construct(
        id=f"{first.id}{JOINT}{second.id}",
        kind="stack",
        parts=(first.id, second.id),
        source="stack of two candidates",
        price=None if None in prices else sum(prices),
    )

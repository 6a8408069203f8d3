"""Which candidates the section [build] leaves: must-have and must-not parts, parts without price, filter pairs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from codesign.catalog import Catalog, Filter, select
from codesign.errors import CatalogError, ProblemError, nearest
from codesign.problem.choices import with_pairs
from codesign.problem.schema import ProblemSpec


@dataclass(frozen=True, slots=True)
class Purchase:
    """The rules of one problem about what is bought."""

    spec: ProblemSpec
    where: str
    catalog: Catalog

    def check_names(self) -> None:
        """Raise ProblemError when must_have or must_not name a part there is not."""
        known = {name for kind in ("led", "filter", "camera") for name in self.catalog.parts(kind)}
        for key in ("must_have", "must_not"):
            for name in getattr(self.spec.build, key):
                if name not in known:
                    raise ProblemError(
                        f"{self.where}: build.{key} names {name!r}, no such part; {nearest(name, known)}"
                    )

    def needed(self, kind: str) -> list[str]:
        """Parts of a kind that are bought in any case."""
        return [name for name in self.spec.build.must_have if name in self.catalog.parts(kind)]

    def refuses(self, part) -> bool:
        """Whether the part must not be used."""
        return part.id in self.spec.build.must_not

    def unpriced(self, part) -> str | None:
        """Say so when a price budget cannot take the part for want of a price."""
        if self.spec.build.price_budget is None or part.price is not None or getattr(part, "kind", None) == "none":
            return None
        stacked = [self.catalog.part("filter", name) for name in getattr(part, "parts", None) or ()]
        if stacked and all(self.unpriced(inner) is None for inner in stacked):
            return None
        return "has no price, build.price_budget needs one"

    def require(self, kind: str, parts: Sequence) -> None:
        """Raise ProblemError when a must-have part is not among the candidates of its kind."""
        offered = [part.id for part in parts]
        for name in self.needed(kind):
            if name not in offered:
                raise ProblemError(
                    f"{self.where}: build.must_have names {name!r}, not among the candidates; {nearest(name, offered)}"
                )

    def filters(self, chosen: tuple[Filter, ...]) -> Sequence[Filter]:
        """Add pairs, and keep what holds the must-have filters."""
        self.require("filter", chosen)
        wanted, needed = self.spec.candidates.filter_pairs, self.needed("filter")
        if not wanted and not needed:
            return chosen
        choices = with_pairs(chosen, self._stackable(chosen)).containing(needed)
        if not len(choices):
            raise ProblemError(
                f"{self.where}: build.must_have names filters {', '.join(needed)}, no single choice holds them all; "
                "allow candidates.filter_pairs or name one"
            )
        return choices if wanted else tuple(choices)

    def _stackable(self, chosen: tuple[Filter, ...]) -> Sequence[Filter]:
        wanted = self.spec.candidates.filter_pairs
        pool = {part.id: part for part in chosen if part.kind != "none"}
        if wanted is False or not pool:
            return ()
        try:
            return select(pool, "all" if wanted is True else wanted)
        except CatalogError as error:
            raise CatalogError(f"{self.where}: candidates.filter_pairs: {error}") from None

    def cameras(self, chosen: tuple) -> tuple:
        """Keep the must-have camera only, where there is one."""
        self.require("camera", chosen)
        needed = self.needed("camera")
        if len(needed) > 1:
            raise ProblemError(f"{self.where}: build.must_have names cameras {', '.join(needed)}; name one")
        return tuple(camera for camera in chosen if not needed or camera.id == needed[0])

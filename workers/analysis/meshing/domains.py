"""What lies on each side of the pieces of an arrangement: the plate, a region, or nothing.

Pieces cross nothing, so a chain of pieces between two meetings with other loops lies wholly inside
or wholly outside each of those; the inside of its own loop is on its left. Both sides of all pieces
together show every face of the arrangement, and with it what is wrong: faces of holes and regions
beyond the outline, of two holes, of regions that overlap partly. Of nested regions the inner one
counts.
"""

from collections import Counter
from collections.abc import Iterator
from functools import cached_property
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.arrangement import Arrangement
from workers.analysis.meshing.drawing import OUTSIDE
from workers.analysis.meshing.insides import Insides
from workers.analysis.meshing.places import at
from workers.errors import Fault

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Face = frozenset[int]  # the loops around it

OUTLINE = 0  # number of the outline among the loops
MATERIAL = 1  # domain of the plate where no region overrides it; 2 + loop number is a region's
DEEPEST = 100  # regions inside each other


class Domains:
    """The domains of an arrangement whose pieces meet at their ends only."""

    def __init__(self, arrangement: Arrangement) -> None:
        self._arrangement = arrangement
        self._loops = arrangement.loops
        self._insides = Insides(arrangement)
        kinds = [loop.kind for loop in self._loops]
        self._holes = frozenset(n for n, kind in enumerate(kinds) if kind == "hole")
        self._regions = frozenset(n for n, kind in enumerate(kinds) if kind == "region")

    def of(self, piece: int) -> tuple[int, int]:
        """Domains on the left and on the right of a piece."""
        left, right = self._sides[piece]
        return self._domain(left), self._domain(right)

    def at(self, places: Array) -> list[int]:
        """Domain of each of the places, none of them on a border."""
        around: list[set[int]] = [set() for _ in places]
        for place, loop in zip(*self._insides.of(places), strict=True):
            around[place].add(int(loop))
        return [self._domain(frozenset(loops)) for loops in around]

    def _domain(self, face: Face) -> int:
        if not self._is_material(face):
            return OUTSIDE
        regions = face & self._regions
        return 2 + min(regions, key=lambda n: self._loops[n].area) if regions else MATERIAL

    def _is_material(self, face: Face) -> bool:
        return OUTLINE in face and not face & self._holes

    # --- where each piece lies ----------------------------------------------------------------

    @cached_property
    def _sides(self) -> list[tuple[Face, Face]]:
        """The faces on the left and on the right of each piece."""
        sides = []
        for piece, around in zip(self._arrangement.pieces, self._around, strict=True):
            left = {loop for loop, forward in piece.owners.items() if forward}
            sides.append((around | left, around | (piece.owners.keys() - left)))
        return sides

    @cached_property
    def _around(self) -> list[Face]:
        """The loops that each piece lies in; those that own it do not count."""
        pieces, table = self._arrangement.pieces, self._arrangement.table
        chains = list(self._chains())
        lengths = table.lengths
        # The middle of the longest piece is farthest from where the chain meets other loops.
        longest = np.array([chain[np.argmax(lengths[chain])] for chain in chains], np.intp)
        inside: list[set[int]] = [set() for _ in chains]
        middles = table.at(longest, np.full(len(longest), 0.5))
        for chain, loop in zip(*self._insides.of(middles), strict=True):
            inside[chain].add(int(loop))
        around: list[Face] = [frozenset()] * len(pieces)
        for numbers, loops in zip(chains, inside, strict=True):
            for number in numbers:
                around[number] = frozenset(loops.difference(pieces[number].owners))
        return around

    def _chains(self) -> Iterator[Index]:
        """Pieces of each loop that follow each other without meeting another loop."""
        for loop, way in enumerate(self._arrangement.ways):
            if len(way):
                breaks = np.flatnonzero(self._meetings[self._arrangement.starts(loop)])
                turned = np.roll(way, -breaks[0]) if len(breaks) else way
                yield from np.split(turned, breaks[1:] - breaks[0]) if len(breaks) else [way]

    @cached_property
    def _meetings(self) -> NDArray[np.bool_]:
        """Which vertices more than one loop comes through, (v,)."""
        count = np.zeros(len(self._arrangement.vertices), np.intp)
        for loop in range(len(self._loops)):
            count[np.unique(self._arrangement.starts(loop))] += 1
        return count > 1

    # --- what is wrong --------------------------------------------------------------------------

    def faults(self) -> list[Fault]:
        """Holes and regions that are not where they can be; [] if all are."""
        faces: dict[Face, int] = {}
        for piece, sides in enumerate(self._sides):
            for face in sides:
                faces.setdefault(face, piece)
        deep = [(face, p) for face, p in faces.items() if len(face & self._regions) > DEEPEST]
        if deep:
            return [self._too_deep(*deep[0])]
        faults = [*self._beyond(faces), *self._in_holes(faces), *self._overlaps(faces)]
        return faults or list(self._swallowed(faces))

    def _too_deep(self, face: Face, piece: int) -> Fault:
        count = len(face & self._regions)
        return Fault(
            "/geometry/regions",
            f"{count} regions lie inside each other near {self._middle(piece)}; at most {DEEPEST} "
            "may",
        )

    def _beyond(self, faces: dict[Face, int]) -> Iterator[Fault]:
        inside = frozenset().union(*(face for face in faces if OUTLINE in face))
        seen: set[int] = set()
        for face in faces:
            for number in sorted(face - seen if OUTLINE not in face else ()):
                seen.add(number)
                loop = self._loops[number]
                how = "reaches beyond" if number in inside else "lies outside"
                yield Fault(
                    loop.pointer,
                    f"{loop.label} {how} the plate's outline near {self._beyond_at(number)}; keep "
                    "it inside",
                )

    def _beyond_at(self, number: int) -> str:
        way = self._arrangement.ways[number]
        beyond = (p for p in way if any(OUTLINE not in f and number in f for f in self._sides[p]))
        return self._middle(next(beyond, way[0]))

    def _in_holes(self, faces: dict[Face, int]) -> Iterator[Fault]:
        seen: set[tuple[int, int]] = set()
        for face, piece in faces.items():
            for pair in combinations(sorted(face & self._holes), 2):
                if pair not in seen:
                    seen.add(pair)
                    one, other = sorted((self._loops[n] for n in pair), key=lambda h: -h.area)
                    yield Fault(
                        other.pointer,
                        f"{other.label} lies in {one.label} near {self._middle(piece)}; leave one "
                        "of them out",
                    )

    def _overlaps(self, faces: dict[Face, int]) -> Iterator[Fault]:
        """Regions that overlap partly, so that neither is the inner one."""
        alone: Counter[int] = Counter()
        together: Counter[tuple[int, int]] = Counter()
        where: dict[tuple[int, int], int] = {}
        for face, piece in faces.items():
            if self._is_material(face):
                regions = sorted(face & self._regions)
                alone.update(regions)
                for pair in combinations(regions, 2):
                    together[pair] += 1
                    where.setdefault(pair, piece)
        for pair, count in together.items():
            if all(alone[number] > count for number in pair):
                one, other = (self._loops[number] for number in pair)
                yield Fault(
                    other.pointer,
                    f"{other.label} overlaps {one.label} partly near {self._middle(where[pair])}; "
                    "a region may lie inside another, hold it or share a border with it, but not "
                    "overlap it",
                )

    def _swallowed(self, faces: dict[Face, int]) -> Iterator[Fault]:
        """Regions of which other regions and holes leave nothing."""
        left = {self._domain(face) for face in faces}
        for number in sorted(self._regions):
            if 2 + number not in left:
                loop = self._loops[number]
                yield Fault(
                    loop.pointer,
                    f"nothing is left of {loop.label}: other regions or holes cover it altogether "
                    f"near {self._middle(int(self._arrangement.ways[number][0]))}; leave one of "
                    "them out",
                )

    def _middle(self, piece: int) -> str:
        return at(self._arrangement.pieces[piece].curve.at(np.array([0.5]))[0])

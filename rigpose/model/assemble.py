"""From a decoded document to a checked `Rig`, or to all that is wrong with it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

from rigpose.model.bench import REST, Bench
from rigpose.model.bodies import add_bones, add_joints, add_plates, add_rams
from rigpose.model.consistent import check_whole
from rigpose.model.drives import add_cranks, add_limits, add_rails, add_ties
from rigpose.model.extent import extent
from rigpose.model.fittings import Fittings
from rigpose.model.groups import add_branches, add_frozen, read_names
from rigpose.model.head import Head, check_version, read_head
from rigpose.model.hinges import add_hinges, add_universals, refuse_in_the_plane
from rigpose.model.names import KeyPath, shown
from rigpose.model.notes import Notes, Where
from rigpose.model.planes import add_planes
from rigpose.model.rig import Coordinates, Pair, Rig
from rigpose.model.sizes import resolve_sizes
from rigpose.model.sliders import add_sliders
from rigpose.model.spec import SECTIONS

Document = Mapping[str, object]


class Outside(Protocol):
    """Brings in what a document names but doesn't hold: other rig files and places."""

    def places(self, bench: Bench, head: Head, document: Document) -> Mapping[str, Coordinates]:
        """Joints' places from the CSV file that ``head.rest`` names."""

    def copies(self, bench: Bench, head: Head, table: Document) -> None:
        """Add the parts of all copies to the bench."""


class Nothing:
    """No files at all: for rigs that are made in Python."""

    def places(self, bench: Bench, head: Head, document: Document) -> Mapping[str, Coordinates]:
        """Refuse: there is no folder to look in."""
        bench.notes.add(("rest",), "only a rig file can name another file", shown(document["rest"]),
                        "give the joints' `at`, or write a rig file")
        return {}

    def copies(self, bench: Bench, head: Head, table: Document) -> None:
        """Refuse: there is no folder to look in."""
        bench.notes.add(("copies",), "only a rig file can bring in copies", shown(list(table)),
                        "write a rig file")
        for name in table:
            bench.lose("copy", name)


@dataclass(frozen=True)
class Built:
    """A rig and the axes of its hinges, which are mere joints in the rig itself."""

    rig: Rig
    hinges: Mapping[str, Pair]


def assemble(document: Document, *, name: str, where: Where, outside: Outside | None = None,
             sizes: Mapping[str, float] | None = None, source: str = "") -> Rig:
    """Build a rig from a document: nested dicts, lists, numbers and texts as in a rig file.

    ``name`` stands in for a missing one, ``where`` tells file and line of a key path, ``sizes``
    win over the document's own. Raises BadInput with every problem found, up to 20.
    """
    return build(document, name=name, where=where, outside=outside, sizes=sizes,
                 source=source).rig


def build(document: Document, *, name: str, where: Where, outside: Outside | None = None,
          sizes: Mapping[str, float] | None = None, source: str = "") -> Built:
    """As `assemble`, with what a rig that brings this one in may name besides its parts."""
    bench = Bench(Notes(where))
    check_version(bench, document)
    tables = {section: _table(bench, document, section) for section in document
              if section in SECTIONS}
    given = dict(tables.get("sizes", {}))
    _override(bench, given, sizes or {})
    bench.sizes = resolve_sizes(bench.notes, given)
    head = read_head(bench, document, name)
    bench.dim, bench.slack, bench.slash = head.dim, head.slack, head.flat
    for size in given:
        bench.taken.setdefault(REST, {})[size] = "sizes"
    _fill(bench, head, document, tables, outside or Nothing())
    names = read_names(bench, tables.get("names", {}))
    studio = tables.get("studio", {})
    _check_studio(bench, ("studio",), studio)
    check_whole(bench)
    bench.notes.stop_if_any()
    return Built(_rig(bench, head, names, studio, source), bench.hinges)


def _table(bench: Bench, document: Document, section: str) -> Mapping[str, object]:
    value = document[section]
    if isinstance(value, dict):
        return value
    bench.notes.add((section,), "a section is a table of parts by their names", shown(value),
                    f"write [{section}] and one part a line below it")
    return {}


def _override(bench: Bench, given: dict[str, object], sizes: Mapping[str, float]) -> None:
    for size, value in sizes.items():
        if size in given:
            given[size] = value
        else:
            bench.notes.unknown(("sizes",), "size", size, list(given))


def _fill(bench: Bench, head: Head, document: Document, tables: Mapping[str, Document],
          outside: Outside) -> None:
    """All sections, in the order in which they refer to one another.

    Copies come before the rig's own bodies: so what a copy's joints are tied to first, and with
    it how their bends are measured, is the same in the copy as in its own file.
    """
    places = outside.places(bench, head, document) if document.get("rest") is not None else {}
    joints = tables.get("joints", {})
    if not joints and "copies" not in tables:
        bench.notes.add(("joints",), "a rig has joints", "none", "name them in [joints]")
    add_joints(bench, joints, places)
    if tables.get("copies"):
        outside.copies(bench, head, tables["copies"])
    at = [j.at for j in bench.parts.joints.values() if j.at is not None]
    bench.size = extent(at, ()) if len(at) > 1 else 0.0
    for section, add in (("rams", add_rams), ("bones", add_bones), ("plates", add_plates)):
        add(bench, tables.get(section, {}))
    bench.size = bench.size or extent([], [b.length for b in bench.parts.bones.values()])
    _join(bench, tables)
    for section, add in (("planes", add_planes), ("rails", add_rails), ("cranks", add_cranks),
                         ("limits", add_limits), ("ties", add_ties), ("frozen", add_frozen),
                         ("branches", add_branches)):
        add(bench, tables.get(section, {}))


def _join(bench: Bench, tables: Mapping[str, Document]) -> None:
    """Hinges and the like, after the parts that they join and before all that may name them."""
    if bench.dim == 2:
        refuse_in_the_plane(bench, tables)
        return
    fit = Fittings(bench)
    for section, add in (("hinges", add_hinges), ("universals", add_universals),
                         ("sliders", add_sliders)):
        add(fit, tables.get(section, {}))
    fit.finish()


def _check_studio(bench: Bench, path: KeyPath, value: object) -> None:
    if value is None:
        bench.notes.add(path, "[studio] holds no null, which TOML could not write", "null",
                        "leave the key out")
    elif isinstance(value, dict):
        for key, inner in value.items():
            _check_studio(bench, (*path, key), inner)
    elif isinstance(value, list):
        for k, inner in enumerate(value):
            _check_studio(bench, (*path, k), inner)


def _rig(bench: Bench, head: Head, names: Mapping[str, str], studio: Mapping[str, object],
         source: str) -> Rig:
    parts = bench.parts
    return Rig(
        name=head.name, dim=head.dim, joints=tuple(parts.joints.values()),
        bones=tuple(parts.bones.values()), plates=tuple(parts.plates.values()),
        rails=tuple(parts.rails.values()), rams=tuple(parts.rams.values()),
        cranks=tuple(parts.cranks.values()), limits=tuple(parts.limits.values()),
        ties=tuple(parts.ties.values()), planes=tuple(parts.planes.values()),
        frozen=tuple(parts.frozen.values()),
        branches=parts.branches, names=names, unit=head.unit, slack=head.slack, close=head.close,
        plane=head.plane, up=head.up, note=head.note, source=source, studio=studio,
    )

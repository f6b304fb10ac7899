"""[copies]: other rig files, brought in any number of times, and places from a CSV file.

Each copy is loaded and checked as a rig of its own, so its lengths are measured in its own file;
then it is moved, its parts are renamed ``copy/part``, and joined joints become the parent's.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path, PureWindowsPath

from rigpose.files.copyplan import MOST_COPIES, bring_in, make_plan, numbered
from rigpose.files.document import read_document
from rigpose.files.restplaces import rest_places
from rigpose.ground.errors import BadInput
from rigpose.model.assemble import Built, build
from rigpose.model.bench import Bench
from rigpose.model.decode import decode
from rigpose.model.head import Head
from rigpose.model.names import KeyPath, shown
from rigpose.model.rig import METRES, Coordinates
from rigpose.model.spec import CopySpec

MOST_JOINTS = 1_000_000
"""Files that bring in one another multiply; this bounds what a few lines can ask for."""

Loaded = dict[tuple[Path, tuple[tuple[str, float], ...]], Built | None]


@dataclass(frozen=True)
class Folder:
    """Reads what a rig file names beside itself.

    ``chain`` holds the files being read, the outermost first; ``loaded`` what was read before
    (None: refused and told already).
    """

    chain: tuple[Path, ...]
    top: Path
    loaded: Loaded = field(default_factory=dict)

    @classmethod
    def of(cls, file: Path) -> Folder:
        """The folder of a rig file that nothing brought in."""
        return cls((file.resolve(),), file.parent.resolve())

    def places(self, bench: Bench, head: Head, document: Mapping[str, object]) -> (
        Mapping[str, Coordinates]
    ):
        """Joints' places from the CSV file that ``head.rest`` names, in the rig's own frame."""
        if head.rest is None:
            return {}
        file = self._inside(bench, ("rest",), head.rest.file)
        return rest_places(bench, head, document, file, "" if file is None else self._called(file))

    def copies(self, bench: Bench, head: Head, table: Mapping[str, object]) -> None:
        """Add the parts of all copies to the bench, in the file's order."""
        for name, raw in table.items():
            spec = decode(bench.notes, ("copies", name), raw, CopySpec)
            if not bench.claim("copies", name) or spec is None or (
                not self._add(bench, head, name, spec)
            ):
                count = spec.repeat if spec and spec.repeat else 0
                for lost in (name, *numbered(name, min(count, MOST_COPIES))):
                    bench.lose("copy", lost)

    def _add(self, bench: Bench, head: Head, name: str, spec: CopySpec) -> bool:
        before = len(bench.notes)
        built = self._built(bench, head, name, spec)
        plan = make_plan(bench, name, spec, built.rig, METRES[head.unit]) if built else None
        if built is None or plan is None or len(bench.notes) > before:
            return False
        rig = built.rig
        if len(bench.parts.joints) + len(rig.joints) * len(plan.names) > MOST_JOINTS:
            bench.notes.add(("copies", name), f"a rig has at most {MOST_JOINTS} joints",
                            f"{len(plan.names)} copies of {len(rig.joints)} joints",
                            "bring in fewer")
            return False
        return bring_in(bench, plan, built)

    def _built(self, bench: Bench, head: Head, name: str, spec: CopySpec) -> Built | None:
        """The rig that a copy is of, with its own sizes, or None once that is told."""
        path = ("copies", name)
        values = {s: bench.number((*path, "sizes", s), v) for s, v in spec.sizes.items()}
        sizes = {s: v for s, v in values.items() if v is not None}
        file = self._inside(bench, (*path, "of"), spec.of)
        if file is None or len(sizes) < len(values):
            return None
        if file in self.chain:
            circle = [*self.chain[self.chain.index(file):], file]
            bench.notes.add((*path, "of"), "a rig may not be a copy inside itself",
                            " → ".join(f.name for f in circle), "bring in another file")
            return None
        key = (file, tuple(sorted(sizes.items())))
        if key not in self.loaded:
            self.loaded[key] = self._load(bench, (*path, "sizes"), file, sizes)
        built = self.loaded[key]
        if built is not None and built.rig.dim != head.dim:
            bench.notes.add((*path, "of"), f"a copy has the dimension of the rig, {head.dim}",
                            f"dim = {built.rig.dim} in {spec.of}", "bring in another file")
            return None
        return built

    def _load(self, bench: Bench, path: KeyPath, file: Path, sizes: Mapping[str, float]) -> (
        Built | None
    ):
        inner = replace(self, chain=(*self.chain, file))
        try:
            document = read_document(file, self._called(file))
            own = document.data.get("sizes")
            known = own if isinstance(own, dict) else {}
            for size in [s for s in sizes if s not in known]:
                bench.notes.unknown((*path, size), f"size in {file.name}", size, known)
            given = {s: v for s, v in sizes.items() if s in known}
            return build(document.data, name=file.stem, where=document.where, outside=inner,
                         sizes=given, source=str(file))
        except BadInput as bad:
            bench.notes.take(bad.problems)
            return None

    def _called(self, file: Path) -> str:
        return file.relative_to(self.top).as_posix()

    def _inside(self, bench: Bench, path: KeyPath, name: str) -> Path | None:
        """A file named in the innermost file, only if it lies in that file's folder."""
        folder = self.chain[-1].parent
        outside = (Path(name).is_absolute() or ".." in Path(name).parts or "\\" in name
                   or "\0" in name or bool(PureWindowsPath(name).drive) or not name.strip())
        file = folder if outside else (folder / name).resolve()
        if outside or not file.is_relative_to(folder):
            bench.notes.add(path, "files are looked for inside the rig's own folder only",
                            shown(name), "put the file there and write its name with / between "
                            "folders")
            return None
        if not file.is_file():
            bench.notes.add(path, "there must be a file of this name beside the rig file",
                            shown(name), "check the name")
            return None
        return file

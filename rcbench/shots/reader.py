"""Reading shots: files or folders of files in, one `Shots` out, and every row that was not used accounted for.

Which repeat a row belongs to: the `repeat` column says it, or, for a whole file, the table [repeat] of shots.toml; with
neither, rows belong to the one repeat that the roster has of their circuit, and are refused where it has several. Where
the roster has one repeat of a circuit and nothing came back under its number, the run numbered 0 is taken for it.
"""

from __future__ import annotations

import importlib
from collections import Counter
from collections.abc import Iterable, Mapping
from pathlib import Path

from rcbench.errors import InputError, raise_all
from rcbench.files import write_text
from rcbench.shots.declarations import EXECUTION_FILE, SHOTS_FILE, Declared, Execution, read_declared, read_execution
from rcbench.shots.intake import AT_ONCE, Intake, Part, Runs, by_key, merge_times
from rcbench.shots.mended import MENDED_FILE, mended_notes
from rcbench.shots.records import BadRow, Irregular, Place
from rcbench.shots.shots import Problem, Roster, ShotFile, Shots
from rcbench.shots.sources import Source, list_sources
from rcbench.shots.tally import Tally

__all__ = ["Problem", "ShotFile", "Shots", "bad_rows_csv", "read_shots"]
_SAMPLE = 3  # names given as examples in a message


def read_shots(
    path: Path | str, kit: Roster, *, bit_order: str | None = None, skip_bad: Path | bool | None = None
) -> Shots:
    """Read the measured bitstrings of a kit.

    Args:
        path: a file (CSV, JSON, NPZ, Parquet) or a folder of them; shots.toml, execution.toml and mended.json beside
            it count.
        kit: the kit, for its roster.
        bit_order: `q0-first` or `q0-last`, where shots.toml does not say it.
        skip_bad: write bad rows aside to this CSV file (file, line, reason, content) instead of refusing their file;
            True keeps them in `Shots.bad_rows` only. A file that is broken as a whole is one row with line 0.
    Raises:
        InputError: no bit order, a broken file or bad rows (20 at once), the same file twice, nothing of this kit.
    """
    path = Path(path)
    sources, others = list_sources(path, skip_bad if isinstance(skip_bad, Path) else None)
    folder = path if path.is_dir() else path.parent
    declared = read_declared(folder, bit_order)
    execution = read_execution(folder)
    reading = _Reading(kit, declared, keep_all=bool(skip_bad))
    reading.check_names(sources, folder)
    reading.problems += mended_notes(folder, str(getattr(kit, "hash", "")))
    for source in sources:
        reading.read(source)
    shots = reading.finish(execution, _declaration_files(folder), others, path)
    if isinstance(skip_bad, Path):
        write_text(skip_bad, bad_rows_csv(shots.bad_rows))
    return shots


def bad_rows_csv(bad_rows: Iterable[tuple[str, BadRow]]) -> str:
    """Bad rows as CSV: file, line (row for NPZ and Parquet, 0 for a whole file), reason, content."""
    import csv
    import io

    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(("file", "line", "reason", "content"))
    for name, bad in bad_rows:
        reason = str(InputError(bad.key, bad.found, bad.allowed))
        cells = (name, str(bad.place.number), reason, bad.content)
        writer.writerow([cell.encode("utf-8", "backslashreplace").decode() for cell in cells])
    return out.getvalue()


def _declaration_files(folder: Path) -> list[ShotFile]:
    """The files beside the shots that say how to read them: a changed one is another input."""
    present = [name for name in (EXECUTION_FILE, MENDED_FILE, SHOTS_FILE) if (folder / name).exists()]
    return [ShotFile(name, Source(folder / name).sha256(), 0) for name in present]


class _Reading:
    """The state of one `read_shots`: what the files read so far gave."""

    def __init__(self, kit: Roster, declared: Declared, *, keep_all: bool) -> None:
        self.declared, self.keep_all = declared, keep_all
        self.runs = Runs(kit)
        if not any(map(declared.reading.fits, self.runs.n_bits.tolist())):
            n_bits = sorted(set(self.runs.n_bits.tolist()))
            allowed = f"a map of every classical bit; circuits of this kit have {', '.join(map(str, n_bits))} bits"
            raise InputError("bits", list(declared.reading.bits or ()), allowed, f"{SHOTS_FILE}: ")
        self.intake = Intake(self.runs, declared.reading, keep_all=keep_all)
        self.total = Part(Tally(self.runs.max_bits))
        self.files: list[ShotFile] = []
        self.errors: list[InputError] = []
        self.bad: list[tuple[str, BadRow]] = []
        self.problems: list[Problem] = []
        self._seen: dict[str, str] = {}

    def check_names(self, sources: list[Source], folder: Path) -> None:
        """A file named in shots.toml that is not there is a slip of the pen."""
        names = [source.name for source in sources]
        for name in self.declared.repeat:
            if name not in names and not (folder / name).exists():
                raise InputError(f"repeat.{name}", name, f"a file beside {SHOTS_FILE}", f"{SHOTS_FILE}: ")

    def read(self, source: Source) -> None:
        """Read one file; bad rows and broken files are kept for the message, or set aside."""
        digest = source.sha256()
        try:
            if digest in self._seen:
                raise source.error(
                    "file", f"the same content as {self._seen[digest]}", "every file once: its shots would count twice"
                )
            self._seen[digest] = source.name
            part = self._part(source)
        except InputError as error:
            self.files.append(ShotFile(source.name, digest, 0))
            self._whole_file_is_bad(source, error.at(f"{source.name}: "))
            return
        self.files.append(ShotFile(source.name, digest, part.rows))
        self.problems += [Problem("note", note) for note in source.notes]
        if not part.rows:
            self.problems.append(Problem("warning", f"{source.name}: no rows", "send the file again if it had any"))
        self._merge(source, part)

    def _part(self, source: Source) -> Part:
        module = importlib.import_module(f"rcbench.shots.{source.format}")
        repeat = self.declared.repeat.get(source.name)
        try:
            return self.intake.read(module.batches(source, False), repeat)
        except Irregular:
            source.notes.clear()
            return self.intake.read(module.batches(source, True), repeat)

    def _whole_file_is_bad(self, source: Source, error: InputError) -> None:
        if not self.keep_all:
            self.errors.append(error)
            self._stop_when_many()
            return
        self.bad.append((source.name, BadRow(Place(0, error.where), error.key, error.found, error.allowed, "")))
        text = f"{source.name}: the whole file set aside ({error})"
        self.problems.append(Problem("warning", text, "send the file again"))

    def _merge(self, source: Source, part: Part) -> None:
        if part.bad and not self.keep_all:
            self.errors += [InputError(b.key, b.found, b.allowed, b.place.prefix) for b in part.bad]
            self._stop_when_many()
            return
        if part.bad:
            reasons = Counter(bad.key for bad in part.bad)
            listed = ", ".join(f"{count} with a wrong {key}" for key, count in sorted(reasons.items()))
            text = f"{source.name}: {len(part.bad)} of {part.rows} rows set aside ({listed})"
            self.problems.append(Problem("warning", text, "mend the rows and send them again"))
            self.bad += [(source.name, bad) for bad in part.bad]
        total = self.total
        total.tally.extend(part.tally)
        total.rows += part.rows
        total.unknown += part.unknown
        total.discards += part.discards
        for number, span in part.times.items():
            total.times[number] = merge_times(total.times.get(number), span)
        for number, labels in part.labels.items():
            total.labels.setdefault(number, set()).update(labels)

    def _stop_when_many(self) -> None:
        if len(self.errors) >= AT_ONCE:
            self.raise_errors()

    def raise_errors(self) -> None:
        """Raise what was found so far, a bounded number at once."""
        shown = self.errors[:AT_ONCE]
        if len(self.errors) >= AT_ONCE:
            last = shown[-1]
            allowed = f"{last.allowed}\n(reading stopped after {AT_ONCE} errors; --skip-bad FILE sets bad rows aside)"
            shown[-1] = InputError(last.key, last.found, allowed, last.where)
        raise_all(shown)

    def finish(self, execution: Execution, declarations: list[ShotFile], others: list[str], path: Path) -> Shots:
        """Everything together; InputError where a file was bad, or nothing is of this kit."""
        self.raise_errors()
        tallied = list(self.total.tally.outcomes(self.runs.run_bits))
        self.runs.settle({number for number, _ in tallied} | set(self.total.discards))
        outcomes = {self.runs.keys[number]: found for number, found in tallied}
        discards = by_key(self.runs, self.total.discards)
        unknown = dict(sorted(self.total.unknown.items()))
        if not outcomes and not discards:
            self._nothing(unknown, path)
        if others:
            self.problems.append(Problem("note", f"not read: {', '.join(others)}"))
        return Shots(
            outcomes=outcomes,
            bit_order=self.declared.reading.name,
            files=(*self.files, *declarations),
            execution=execution,
            problems=tuple(self.problems),
            discards=discards,
            unknown=unknown,
            times=by_key(self.runs, self.total.times),
            batches={key: tuple(sorted(labels)) for key, labels in by_key(self.runs, self.total.labels).items()},
            bad_rows=tuple(self.bad),
        )

    def _nothing(self, unknown: Mapping[str, int], path: Path) -> None:
        """Say why not one shot is of this kit."""
        ours = ", ".join(list(self.runs.ids)[:_SAMPLE])
        if unknown:
            theirs = ", ".join(list(unknown)[:_SAMPLE])
            raise InputError(
                "circuit_id", theirs, f"circuits of this kit ({ours}, ...); these are shots for another kit"
            )
        raise InputError("shots", f"{path.name} without a shot", f"shots of circuits of this kit ({ours}, ...)")

"""The folder of files that holds a run's results: written whole or not at all, and read back.

Every file is made in a hidden folder inside the target and moved into place when all are there; ``run.json``, with the
hash of each, moves last. So a folder is complete exactly when its files match its ``run.json``.
"""

from __future__ import annotations

import datetime as dt
import hashlib
import json
import os
import shutil
import tempfile
import time
from collections.abc import Callable, Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
import pandas as pd

from etflux import outlines
from etflux.findings import CannotRead, CannotWrite
from etflux.results import tables
from etflux.results.netcdf import read_netcdf, write_netcdf
from etflux.results.record import Results

if TYPE_CHECKING:
    Writer = Callable[[Results, Path], None]
    Progress = Callable[[str, float], None]

MANIFEST = "run.json"
NETCDF = "results.nc"
WORKBOOK = "results.xlsx"
OUTLINES = "counties.geojson"
_WRITING = ".etflux-writing-"
_STALE_SECONDS = 86400.0

# Ten decimals: the two thousand or so depths that enter a year's water balance of one stand then miss closure by
# 1e-7 mm at the very worst. Seventeen digits would be exact, as results.nc is, for twice the size.
DECIMALS = 10
HOUR_DECIMALS = 4  # the day's courses enter no balance
BLOCK_ROWS = 20_000  # made into text at once
PARQUET_ROWS = 1_000_000


class FolderState(NamedTuple):
    """Whether a folder holds a whole run, and if not, why."""

    complete: bool
    reason: str = ""


def default_folder(workbook: Path | str) -> Path:
    """Folder for the results of a workbook, where none is asked for: in the present folder, named after it.

    Examples
    --------
    >>> default_folder("somewhere/valley 2031.xlsx").name
    'valley 2031-etflux'
    """
    return Path.cwd() / f"{Path(workbook).stem}-etflux"


def write_folder(
    results: Results,
    folder: Path | str,
    workbook_writer: Writer | None = None,
    progress: Progress | None = None,
    others: Mapping[str, Writer] | None = None,
) -> Path:
    """Write every file of a run.

    Parameters
    ----------
    results : Results
    folder : path
        Made when it is not there. An earlier run in it is replaced; a file that a person has changed since is kept
        under another name, and a file of another origin is never touched.
    workbook_writer : callable, optional
        Writes results.xlsx, given the results and a path.
    progress : callable, optional
        Called with what is being written and the share done.
    others : mapping of file name to callable, optional
        Further files, written alike.

    Returns
    -------
    Path
        The folder.

    Raises
    ------
    CannotWrite
        If the folder cannot be written, a file is open elsewhere, or a file of the same name is not ours. Nothing
        half-written is left.
    """
    folder = Path(folder)
    tell = progress or (lambda step, share: None)
    writers: dict[str, Writer] = dict(_table_writers(results))
    writers[NETCDF] = write_netcdf
    if results.outlines:
        writers[OUTLINES] = _write_outlines
    # The workbook is the file most likely to be open elsewhere: it moves first, so that a refusal leaves all as it was.
    moving = {**({WORKBOOK: workbook_writer} if workbook_writer else {}), **(others or {}), **writers}
    try:
        folder.mkdir(parents=True, exist_ok=True)
        known = _known(folder)
        _refuse_foreign(folder, moving, known)
        scratch = Path(tempfile.mkdtemp(prefix=_WRITING, dir=folder))
        try:
            for count, (name, write) in enumerate(moving.items()):
                tell(f"writing {name}", count / len(moving))
                write(results, scratch / name)
            tell("writing run.json", 1.0)
            _write_manifest(results, scratch, moving)
            _move(scratch, folder, moving, known)
        finally:
            shutil.rmtree(scratch, ignore_errors=True)
        _clear_leftovers(folder, moving, known)
    except OSError as error:
        what = error.filename or folder
        raise CannotWrite(f"cannot write {what}: {error.strerror or error}. Close it elsewhere or choose -o") from error
    return folder


def folder_state(folder: Path | str) -> FolderState:
    """Whether a folder holds a whole run: its run.json is there and every file matches it."""
    folder = Path(folder)
    manifest = _manifest(folder)
    if manifest is None:
        return FolderState(False, f"no readable {MANIFEST}: no run has been finished here")
    if str(manifest.get("schema_version", "")).split(".")[0] != tables.SCHEMA_VERSION.split(".")[0]:
        return FolderState(False, f"written with table version {manifest.get('schema_version')}, not readable here")
    for name, row in manifest["files"].items():
        if not (folder / name).is_file():
            return FolderState(False, f"{name} is missing")
        if sha256_of(folder / name) != row["sha256"]:
            return FolderState(False, f"{name} is not the file of this run: changed, or from another run")
    return FolderState(True)


def read_folder(folder: Path | str) -> Results:
    """Read the results that :func:`write_folder` wrote.

    Raises
    ------
    CannotRead
        If the folder is not complete.
    """
    folder = Path(folder)
    state = folder_state(folder)
    if not state.complete:
        raise CannotRead(f"{folder} holds no complete results: {state.reason}")
    manifest = _manifest(folder) or {}
    frames = {name: _read_table(folder, name) for name in tables.table_names() if tables.source_of(name) == "frame"}
    frames["names"] = tables.without_bits(frames["names"])
    return Results(
        **read_netcdf(folder / NETCDF),
        **frames,
        findings=tables.findings_of(_read_table(folder, "findings")),
        outlines=outlines.read(folder / OUTLINES, None) if OUTLINES in manifest["files"] else {},
        settings=manifest["settings"],
        source=manifest["input"],
        run_id=manifest["run_id"],
        issued=dt.datetime.fromisoformat(manifest["issued"]),
        version=manifest["version"],
    )


def read_tables(folder: Path | str, names: Iterable[str] | None = None) -> dict[str, pd.DataFrame]:
    """Read tidy tables of a folder, all or the named ones: ids as text, dates as dates, blanks as NaN."""
    return {name: _read_table(Path(folder), name) for name in (names or tables.table_names())}


def sha256_of(path: Path) -> str:
    """SHA-256 of a file, in hexadecimal."""
    with path.open("rb") as content:
        return hashlib.file_digest(content, "sha256").hexdigest()


def _table_writers(results: Results) -> dict[str, Writer]:
    """File names of the tidy tables with what writes each."""

    def writer(name: str) -> Writer:
        return lambda found, path: _write_table(found, name, path)

    writers = {f"{name}.csv": writer(name) for name in tables.table_names()}
    rows = results.stand.sizes["date"] * results.stand.sizes["unit_id"]
    if rows > PARQUET_ROWS and _has_pyarrow():
        writers.pop("stand_daily.csv")
        writers["stand_daily.parquet"] = lambda found, path: _write_parquet(found, "stand_daily", path)
    return writers


def _has_pyarrow() -> bool:
    from importlib.util import find_spec

    return find_spec("pyarrow") is not None


def _write_outlines(results: Results, path: Path) -> None:
    text = json.dumps(outlines.to_geojson(results.outlines), ensure_ascii=False, separators=(",", ":"))
    path.write_text(text + "\n", encoding="utf-8")


def _write_table(results: Results, name: str, path: Path) -> None:
    exact = tables.source_of(name) == "frame"  # short tables; the budgets among them must close to 1e-9
    decimals = None if exact else HOUR_DECIMALS if name == "county_hours" else DECIMALS
    with path.open("w", encoding="utf-8", newline="") as out:
        out.write(",".join(tables.columns(name)) + "\n")
        for block in results.blocks(name, BLOCK_ROWS):
            texts = [_written(block[column], decimals) for column in block.columns]
            out.writelines(line + "\n" for line in map(",".join, zip(*texts, strict=True)))


def _written(values: pd.Series, decimals: int | None) -> list[str]:
    """A column as it goes to a file, half the time of the library's own writer; a missing value is blank."""
    name = str(values.name)
    if tables.column_kind(name) == "date":
        days = pd.to_datetime(values).to_numpy().astype("datetime64[D]")
        return np.where(np.isnat(days), "", np.datetime_as_string(days)).tolist()
    if values.dtype.kind == "f":
        numbers = values.to_numpy() if decimals is None else values.to_numpy().round(decimals) + 0.0  # no minus zero
        return ["" if number != number else repr(number) for number in numbers.tolist()]
    if values.dtype.kind in "iu":
        return ["" if number is pd.NA else str(number) for number in values.tolist()]
    free = name in tables.free_text()
    made = {value: _quoted(value, free) for value in set(values)}
    return [made[value] for value in values]


def _quoted(value: Any, free_text: bool) -> str:
    """A text or a number of a mixed column, quoted where the format asks for it."""
    if value is None or value is pd.NA or value != value:
        return ""
    text = str(tables.guarded(value) if free_text else value)
    return '"' + text.replace('"', '""') + '"' if any(mark in text for mark in ',"\r\n') else text


def _write_parquet(results: Results, name: str, path: Path) -> None:
    import pyarrow as pa  # type: ignore[import-not-found,unused-ignore]
    import pyarrow.parquet as pq  # type: ignore[import-not-found,unused-ignore]

    writer = None
    try:
        for block in results.blocks(name, 10 * BLOCK_ROWS):
            table = pa.Table.from_pandas(block, preserve_index=False)
            writer = writer or pq.ParquetWriter(path, table.schema)
            writer.write_table(table)
    finally:
        if writer is not None:
            writer.close()


def _read_table(folder: Path, name: str) -> pd.DataFrame:
    parquet = folder / f"{name}.parquet"
    if parquet.is_file() and not (folder / f"{name}.csv").is_file():
        return pd.read_parquet(parquet)
    kinds = {column: tables.column_kind(column) for column in tables.columns(name)}
    text = {column: str for column, kind in kinds.items() if kind == "text"}
    try:
        frame = pd.read_csv(
            folder / f"{name}.csv",
            dtype=text,
            keep_default_na=False,
            na_values={column: [""] for column in kinds if column not in text},
            parse_dates=[column for column, kind in kinds.items() if kind == "date"],
            float_precision="round_trip",
            encoding="utf-8",
        )
    except FileNotFoundError as error:
        raise CannotRead(f"{folder / name}.csv is not there") from error
    for column in tables.free_text() & set(frame.columns):
        frame[column] = frame[column].map(tables.unguarded)
    return frame


def _write_manifest(results: Results, scratch: Path, names: Iterable[str]) -> None:
    source = {**dict(results.source), "path": Path(str(results.source.get("path", ""))).name}
    record = {
        "complete": True,
        "run_id": results.run_id,
        "issued": results.issued.isoformat(),
        "version": results.version,
        "schema_version": tables.SCHEMA_VERSION,
        "days": [str(results.dates[0]), str(results.dates[-1])] if len(results.dates) else [],
        "input": source,
        "settings": dict(results.settings),
        "files": {
            name: {"sha256": sha256_of(scratch / name), "bytes": (scratch / name).stat().st_size} for name in names
        },
    }
    text = json.dumps(record, indent=1, ensure_ascii=False, default=str)
    (scratch / MANIFEST).write_text(text + "\n", encoding="utf-8")


def _manifest(folder: Path) -> dict[str, Any] | None:
    """The run.json of a folder, if it is one of ours."""
    try:
        record = json.loads((folder / MANIFEST).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None
    ours = isinstance(record, dict) and isinstance(record.get("files"), dict) and "run_id" in record
    return record if ours else None


def _known(folder: Path) -> dict[str, set[str]]:
    """Files that earlier runs made here, with their hashes: of the finished run and of any that was cut off."""
    known: dict[str, set[str]] = {}
    for place in (folder, *folder.glob(f"{_WRITING}*")):
        for name, row in ((_manifest(place) or {}).get("files") or {}).items():
            if Path(name).name == name:  # a file of this folder, whatever else a changed run.json says
                known.setdefault(name, set()).add(row["sha256"])
    return known


def _refuse_foreign(folder: Path, names: Iterable[str], known: Mapping[str, set[str]]) -> None:
    foreign = [name for name in names if name not in known and (folder / name).exists()]
    if (folder / MANIFEST).exists() and _manifest(folder) is None:
        foreign.append(MANIFEST)
    if foreign:
        raise CannotWrite(
            f"{folder} already has {', '.join(foreign)}, not written by a run. Choose another folder with -o"
        )


def _move(scratch: Path, folder: Path, names: Iterable[str], known: Mapping[str, set[str]]) -> None:
    for name in names:
        _keep_if_changed(folder / name, known.get(name, set()))
        os.replace(scratch / name, folder / name)
    os.replace(scratch / MANIFEST, folder / MANIFEST)


def _keep_if_changed(path: Path, hashes: set[str]) -> None:
    """Move aside a file that a person has changed since it was written."""
    if not path.exists() or sha256_of(path) in hashes:
        return
    number = 1
    while (kept := path.with_name(f"{path.stem}.kept-{number}{path.suffix}")).exists():
        number += 1
    os.replace(path, kept)


def _clear_leftovers(folder: Path, names: Iterable[str], known: Mapping[str, set[str]]) -> None:
    """Remove unchanged files of an earlier run that this one does not write, and what runs cut off long ago left."""
    for name in set(known) - set(names):
        path = folder / name
        if path.is_file() and sha256_of(path) in known[name]:
            path.unlink()
    for place in folder.glob(f"{_WRITING}*"):
        if time.time() - place.stat().st_mtime > _STALE_SECONDS:
            shutil.rmtree(place, ignore_errors=True)

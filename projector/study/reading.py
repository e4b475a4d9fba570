"""The door: a study folder in, a checked and frozen study out, or every fault of the first stage that has any.

Stages: study.toml and which files are there; each table by itself; the tables together.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import partial
from pathlib import Path
from typing import Any, TypeVar

import pandas as pd

from projector.study.building import digest_choices, study_choices
from projector.study.columns import OPTIONAL_TABLES, RATE_TABLES, Table, study_tables
from projector.study.crosscheck import control_errors, lot_errors, rating_errors, segment_errors
from projector.study.digest import input_digest
from projector.study.errors import LocatedError, StudyRefused, StudyTooLarge
from projector.study.files import LIMITS, STUDY_FILE, Limits, read_file, require_folder, require_known_suffix, resolve
from projector.study.formrules import rule_errors
from projector.study.ratechecks import curve_errors, rate_table_errors
from projector.study.rawtables import RawTable, read_raw_table
from projector.study.records import FileDigest, Study, Tables
from projector.study.schema import StudyForm
from projector.study.specialterms import special_term_errors
from projector.study.streamchecks import reserves_at_start, stream_errors
from projector.study.tablecheck import Checked, check_table, empty_table, sorted_by_key
from projector.study.termchecks import check_call_rights, price_and_coupon_errors, security_date_errors
from projector.study.tomlfile import check_form, parse_toml

Result = TypeVar("Result")


@dataclass
class Stage:
    """Faults gathered until the stage ends."""

    errors: list[LocatedError] = field(default_factory=list)
    too_large: bool = False

    def attempt(self, step: Callable[[], Result]) -> Result | None:
        """What the step gives, or None with its faults kept."""
        try:
            return step()
        except StudyRefused as refusal:
            self.errors += refusal.errors
            self.too_large = self.too_large or isinstance(refusal, StudyTooLarge)
            return None

    def end(self) -> None:
        """Refuses when there were faults."""
        if self.errors:
            raise (StudyTooLarge if self.too_large else StudyRefused)(self.errors)


@dataclass(frozen=True)
class NamedTable:
    """A table of the study: its columns, its file, its checked rows in the order of the file."""

    table: Table
    file: str
    sheet: str | None
    frame: pd.DataFrame

    def label(self) -> str:
        """The file as errors name it, with the sheet of a workbook."""
        return f"{self.file}, sheet {self.sheet}" if self.sheet else self.file

    def canonical(self) -> pd.DataFrame:
        """The rows in canonical order; `attrs["file"]` names the file for errors raised above this floor."""
        frame = sorted_by_key(self.frame, self.table)
        frame.attrs["file"] = self.label()
        return frame


def read_study(folder: Path, limits: Limits = LIMITS) -> tuple[Study, tuple[str, ...]]:
    """The study in a folder, and warnings that do not stop it.

    Raises StudyRefused with every located error of the first stage that has any (StudyTooLarge for sizes).
    Tables come typed and in canonical order, each with `row`, the line of its file, and `attrs["file"]`, its name;
    dates are datetime64[s].
    What needs scenarios or accrued interest is checked above this floor: `check_stream_scenarios` for the streams.
    """
    folder = Path(folder)
    form, digests = _read_form(folder, limits)
    named, more = _read_tables(folder, form, limits)
    warnings = _check_together(form, named)
    by_name = {key: entry.canonical() for key, entry in named.items()}
    listed = study_tables(form.defaults.form)
    rate_tables = {named[key].file: by_name[key] for key in named if key not in (listed | OPTIONAL_TABLES)}
    own = {name: by_name[name] for name in listed}
    own |= {name: by_name[name] if name in by_name else empty_table(table) for name, table in OPTIONAL_TABLES.items()}
    tables = Tables(**own, rate_tables=rate_tables)
    digest = input_digest(digest_choices(form), [(named[key].table, by_name[key]) for key in named])
    study = Study(**study_choices(form), tables=tables, input_digest=digest, files=(*digests, *more))
    return study, warnings


def _read_form(folder: Path, limits: Limits) -> tuple[StudyForm, tuple[FileDigest, ...]]:
    """Stage one: study.toml, and whether each file it names is there."""
    require_folder(folder)
    file = read_file(folder, STUDY_FILE, limits.study_bytes)
    raw, lines = parse_toml(file.content)
    form, errors = check_form(raw, lines)
    stage = Stage(errors=errors if form is None else rule_errors(form, lines))
    for name in _names_of_files(raw):
        if stage.attempt(partial(resolve, folder, name)) is not None:
            stage.attempt(partial(require_known_suffix, name))
    stage.end()
    assert form is not None  # otherwise there were errors
    return form, (file.digest(),)


def _names_of_files(raw: dict[str, Any]) -> list[str]:
    """Names of files in study.toml, even where other keys are wrong; each once, in the order written."""
    tables, rates = raw.get("tables"), raw.get("rates")
    sources = rates.get("paths") if isinstance(rates, dict) else None
    found = list(tables.values()) if isinstance(tables, dict) else []
    found += [source.get("file") for source in sources if isinstance(source, dict)] if isinstance(sources, list) else []
    return list(dict.fromkeys(name for name in found if isinstance(name, str) and not name.startswith("FILL IN")))


def _wanted(form: StudyForm) -> dict[str, tuple[Table, str]]:
    """Each table's columns and file; a table of paths goes by its place in the list of sources."""
    files = form.tables.model_dump()
    wanted = {name: (table, files[name]) for name, table in study_tables(form.defaults.form).items()}
    wanted |= {name: (table, files[name]) for name, table in OPTIONAL_TABLES.items() if files[name] is not None}
    for at, source in enumerate(form.rates.paths):
        if source.kind in RATE_TABLES:
            wanted[f"paths {at + 1}"] = (RATE_TABLES[source.kind], source.model_dump()["file"])
    return wanted


def _read_tables(folder: Path, form: StudyForm, limits: Limits) -> tuple[dict[str, NamedTable], list[FileDigest]]:
    """Stage two: each table by itself."""
    stage = Stage()
    named: dict[str, NamedTable] = {}
    digests: dict[str, FileDigest] = {}
    for key, (table, name) in _wanted(form).items():
        file = stage.attempt(partial(read_file, folder, name, limits.file_bytes))
        if file is None:
            continue
        digests[name] = file.digest()
        raw = stage.attempt(partial(read_raw_table, file, table.name, limits))
        if raw is not None:
            checked = _checked(raw, table)
            stage.errors += checked.errors
            named[key] = NamedTable(table, name, raw.sheet, checked.frame)
    stage.end()
    return named, list(digests.values())


def _checked(raw: RawTable, table: Table) -> Checked:
    checked = check_table(raw, table)
    if table.name == "securities":
        checked.errors.extend(price_and_coupon_errors(checked, raw.file))
    return checked


def _check_together(form: StudyForm, named: dict[str, NamedTable]) -> tuple[str, ...]:
    """Stage three: the tables together. Gives the warnings."""
    frames = {key: entry.frame for key, entry in named.items()}
    files = {key: entry.label() for key, entry in named.items()}
    segments = tuple(segment.name for segment in form.segments)
    valuation, securities, lots = form.study.valuation_date, frames["securities"], frames["lots"]
    streams, months = frames["liability_streams"], form.horizon.months
    rights = check_call_rights(frames["call_rights"], securities, valuation, files["call_rights"])
    stage = Stage()
    stage.errors += security_date_errors(securities, valuation, files["securities"])
    stage.errors += lot_errors(lots, securities, segments, files["lots"])
    stage.errors += rights.errors
    stage.errors += special_term_errors(frames, files, valuation)
    stage.errors += curve_errors(frames["yield_curve"], files["yield_curve"])
    stage.errors += _rating_errors(form, frames, files)
    stage.errors += segment_errors(streams, segments, files["liability_streams"])
    stage.errors += stream_errors(streams, months, form.horizon.liability_close_out, files["liability_streams"])
    stage.errors += _binding_errors(form, streams)
    totals = control_sums(lots, streams, {segment.name: segment.cash for segment in form.segments})
    stage.errors += control_errors(frames["control_totals"], totals, segments, files["control_totals"])
    for key, entry in named.items():
        if entry.table.name in RATE_TABLES:
            stage.errors += rate_table_errors(entry.table.name, entry.frame, frames["yield_curve"], months, files[key])
    stage.end()
    return rights.warnings


def _rating_errors(form: StudyForm, frames: dict[str, pd.DataFrame], files: dict[str, str]) -> list[LocatedError]:
    bought = tuple((kind.name, kind.rating) for kind in form.purchases.classes)
    errors = []
    for name, code, what in (("class_spreads", "E420", "class spread"), ("default_costs", "E421", "default cost")):
        ratings = frames[name]["rating"]
        errors += rating_errors(frames["securities"], bought, ratings, code=code, file=files[name], what=what)
    return errors


def _binding_errors(form: StudyForm, streams: pd.DataFrame) -> list[LocatedError]:
    """Streams made for scenarios say for which set: only insensitive blocks need no digest."""
    bound = set(streams["block"].unique()) - set(form.liabilities.rate_insensitive_blocks)
    if form.liabilities.scenario_set_digest is not None or not bound:
        return []
    return [
        LocatedError(
            code="E449",
            file=STUDY_FILE,
            column="liabilities.scenario_set_digest",
            problem="the key is missing although the streams depend on scenarios",
            remedy=(
                "write the digest of the set they were made for, or name the blocks in"
                " liabilities.rate_insensitive_blocks if one stream serves every path"
            ),
        )
    ]


def control_sums(lots: pd.DataFrame, streams: pd.DataFrame, cash: dict[str, float]) -> pd.DataFrame:
    """What the tables give for each control total, by segment: count of lots, par, book value, reserve, cash."""
    by_segment = lots.groupby("segment", sort=True)
    sums = pd.DataFrame(
        {
            "lots_count": by_segment["lot_id"].count().astype(float),
            "par": by_segment["par"].sum(),
            "book_value": by_segment["book_value"].sum(),
            "reserve_statutory": reserves_at_start(streams),
        }
    )
    sums = sums.reindex(list(cash)).fillna(0.0)
    return sums.assign(cash=pd.Series(cash))

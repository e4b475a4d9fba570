"""The year-end run: stages in order, blocks of paths over threads, tables at the end."""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path

from projector.bonds.store import SolveStore
from projector.rates.paths import build_paths
from projector.run.block import BlockResult, project
from projector.run.call_table import calls_frame, puts_frame
from projector.run.checks import control_frame, curve_stage, special_cases, starting_asset_stage, stream_stage
from projector.run.choices import choices_frame
from projector.run.frames import (
    balance_frame,
    canonical_digest,
    decisions_frame,
    flows_frame,
    mix_frame,
    rates_frame,
    scenarios_frame,
)
from projector.run.identities import check_identities
from projector.run.limits import refuse_too_large
from projector.run.measure_table import measures_frame, surplus_tables
from projector.run.prepare import Prepared, prepare
from projector.run.results import RunResults
from projector.run.security_table import securities_frame
from projector.study.reading import read_study

Progress = Callable[[str, int, int], None]


def silent(stage: str, done: int, of: int) -> None:
    """No progress."""


@dataclass(frozen=True)
class Staged:
    """A study that passed every check, laid out, with its warnings."""

    prepared: Prepared
    warnings: tuple[str, ...]


def stage(folder: Path) -> Staged:
    """Reads and checks a study folder; every fault of a stage is raised at once."""
    study, warnings = read_study(folder)
    refuse_too_large(study)
    paths = build_paths(study)
    curve_stage(study, paths)
    stream_stage(study, paths)
    prepared = prepare(study, paths)
    starting_asset_stage(prepared)
    return Staged(prepared, (*warnings, *run_warnings(prepared)))


def run_warnings(prepared: Prepared) -> list[str]:
    """What an examiner must be told: one stream for all paths, tenors not used, spreads that fell back."""
    out = [
        f"Liability block {name} uses one stream for every path: the study declares it insensitive to rates."
        for name in prepared.study.liabilities.rate_insensitive_blocks
    ]
    unused = prepared.paths.reading.unused_tenors()
    if unused:
        listed = ", ".join(str(t) for t in unused)
        out.append(f"Quoted tenors of {listed} months are not used: no node of the curve reads them.")
    fallen = sum(1 for o in prepared.calibrated.origin if o == "rating_spread")
    if fallen:
        out.append(f"{fallen} securities carry their rating's spread because no usable spread gives their price.")
    return out


def block_ranges(paths: int, size: int) -> list[tuple[int, int]]:
    """Consecutive ranges of paths."""
    return [(lo, min(lo + size, paths)) for lo in range(0, paths, size)]


def run_blocks(
    prepared: Prepared, threads: int, block_paths: int | None = None, progress: Progress = silent,
    store: SolveStore | None = None,
) -> list[BlockResult]:  # fmt: skip
    """Every block, in path order whatever order they finish in."""
    count = prepared.paths.count
    size = block_paths or min(prepared.study.numerics.block_paths, max(1, -(-count // max(threads, 1))))
    ranges = block_ranges(count, size)
    done = 0
    with ThreadPoolExecutor(max_workers=max(threads, 1)) as pool:
        futures = [pool.submit(project, prepared, lo, hi, "detail", store) for lo, hi in ranges]
        results = []
        for (lo, hi), future in zip(ranges, futures):
            results.append(future.result())
            done += hi - lo
            progress("projecting paths", done, count)
    return results


def default_threads() -> int:
    """Processors this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else (os.cpu_count() or 1)


def collect(staged: Staged, blocks: list[BlockResult]) -> RunResults:
    """Identities first, which stop the run when one fails; then the tables."""
    prepared = staged.prepared
    identities = check_identities(prepared, blocks)
    tables = [surplus_tables(prepared, b) for b in blocks]
    calls = calls_frame(prepared, blocks)
    frames = {
        "scenarios": scenarios_frame(prepared),
        "rates": rates_frame(prepared),
        "flows": flows_frame(prepared, blocks),
        "balance": balance_frame(prepared, blocks, tables),
        "mix": mix_frame(prepared, blocks),
        "measures": measures_frame(prepared, blocks, calls),
        "calls": calls,
        "puts": puts_frame(prepared, blocks),
        "decisions": decisions_frame(prepared, blocks),
        "securities": securities_frame(prepared),
        "control": control_frame(prepared),
        "identities": identities,
        "choices": choices_frame(prepared.study),
        "special_cases": special_cases(prepared),
    }
    digests = {name: canonical_digest(name, frame) for name, frame in frames.items() if name != "identities"}
    return RunResults(
        study=prepared.study,
        set_digest=prepared.paths.digest(),
        warnings=staged.warnings,
        result_digests=digests,
        **frames,
    )


def run_study(
    folder: Path, threads: int | None = None, block_paths: int | None = None, progress: Progress = silent
) -> RunResults:
    """The whole year-end run of a study folder, in memory."""
    progress("reading and checking", 0, 1)
    staged = stage(folder)
    blocks = run_blocks(staged.prepared, threads or default_threads(), block_paths, progress)
    progress("measuring", 0, 1)
    return collect(staged, blocks)

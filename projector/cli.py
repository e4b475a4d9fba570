"""Commands: they call the package's functions, print paths and figures, and turn refusals into exit codes.

Exit codes: 0 done, 1 our own fault, 2 bad input or usage, 3 an identity failed, 4 refused as too large. Progress goes
to the error stream and is silent when that is not a terminal.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Annotated, Any

import typer

# Before numpy is imported: no result rests on a linear algebra library (C15), and its idle threads burn time.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

app = typer.Typer(
    rich_markup_mode=None, pretty_exceptions_enable=False, add_completion=True, no_args_is_help=True,
    help="Year-end asset adequacy: callable bonds against liability streams, under rate paths. No opinion is given.",
)  # fmt: skip

Folder = Annotated[Path, typer.Argument(help="study folder, with study.toml in it")]


@app.command()
def new(folder: Annotated[Path, typer.Argument(help="folder to make; must not exist or be empty")]) -> None:
    """Write a study folder to start from: a commented study.toml and empty tables."""
    import projector

    projector.new_study(folder)
    print(f"wrote {folder}: state every value in study.toml, fill the tables, then run: projector check {folder}")


@app.command()
def check(
    folder: Annotated[Path | None, typer.Argument(help="study folder, with study.toml in it")] = None,
    schemas: Annotated[
        bool, typer.Option("--schemas", help="print the JSON Schema of study.toml and the Table Schemas, and stop")
    ] = False,
) -> None:
    """Read and check everything, project nothing: choices in force, spreads, special cases, sizes."""
    if schemas:
        print_schemas()
        return
    if folder is None:
        raise typer.BadParameter("name a study folder, or ask for --schemas")
    from projector.run.check_text import check_text
    from projector.run.runner import stage

    print(check_text(stage(folder), str(folder)))


@app.command()
def value(
    folder: Folder,
    out: Annotated[
        Path | None, typer.Option(help="folder for the tables (default: reports/<study>-<digest>-value)")
    ] = None,
    required_yield: Annotated[
        float | None,
        typer.Option(help="minimum yield a year, 0.05 is 5 %: adds the price that gives it whenever repaid"),
    ] = None,
) -> None:
    """Value the holdings at the valuation date: prices, yields, spreads, durations, call odds; projects nothing."""
    from projector.run.results_folder import folder_name
    from projector.run.value_folder import write_values
    from projector.run.value_table import refuse_required, value_tables
    from projector.run.value_text import value_text

    try:
        refuse_required(required_yield)
    except ValueError as fault:
        raise typer.BadParameter(f"--required-yield: {fault}") from None
    if out is not None:
        refuse_target(folder, out, "value")
    with Bar() as bar:
        results = value_tables(folder, required_yield, bar.show)
        target = out or Path("reports") / f"{folder_name(folder, results.study.input_digest)}-value"
        refuse_target(folder, target, "value")
        write_values(
            results, target, {"command": f"projector value {folder.resolve().name}", "required_yield": required_yield}
        )
    print(value_text(results))
    print(f"tables: {target / 'tables'}")


@app.command()
def run(
    folder: Folder,
    out: Annotated[Path | None, typer.Option(help="folder for the results (default: reports/<study>-<digest>)")] = None,
    threads: Annotated[int, typer.Option(min=0, max=256, help="threads, 0 = all; results do not depend on it")] = 0,
    block: Annotated[int, typer.Option(min=0, help="paths a block, 0 = the study's; results do not depend on it")] = 0,
    report: Annotated[bool, typer.Option(help="write the HTML report and the workbook")] = True,
) -> None:
    """Run the year-end test: results tables, workbook and the HTML report, whole or not at all."""
    from projector.run.results_folder import folder_name, write_results
    from projector.run.runner import run_study

    if out is not None:
        refuse_target(folder, out)
    with Bar() as bar:
        results = run_study(folder, threads or None, block or None, bar.show)
        target = out or Path("reports") / folder_name(folder, results.study.input_digest)
        refuse_target(folder, target)
        command = f"projector run {folder.resolve().name}"
        bar.show("writing the report" if report else "writing the tables", 0, 1)
        extras = report_writers(results, command) if report else {}
        write_results(results, target, {"command": command, "report": report}, extras)
    met = results.measures[results.measures["segment"] == "all"]["criterion_met"].astype(bool)
    allowed = results.study.criterion.scenarios_allowed_below
    head = "criterion met" if int((~met).sum()) <= allowed else "criterion not met"
    print(f"{head}: {int(met.sum())} of {len(met)} scenarios at or above the limit, {allowed or 'none'} may be below")
    print(f"results: {target}")
    if report:
        print(f"report: {target / 'report.html'}")


@app.command()
def explain(
    folder: Folder,
    security: Annotated[str, typer.Option(help="identifier of the security")],
    scenario: Annotated[str, typer.Option(help="identifier of the path, such as S3, or its title")],
    out: Annotated[Path | None, typer.Option(help="also draw it, as an SVG file; one of that name is replaced")] = None,
    every: Annotated[bool, typer.Option("--all", help="print every month, not only those around the decision")] = False,
    solve_all: Annotated[
        bool, typer.Option("--solve-all", help="also solve and print the rights that the bound settled")
    ] = False,
) -> None:
    """Say why one security was or was not called on one path: yields, costs and the decision, month by month."""
    from projector.questions.explain import explain as explained
    from projector.report.call_story import story_text

    if out is not None:
        refuse_drawing(folder, out)
    with Bar() as bar:
        bar.show("projecting the path", 0, 1)
        story = explained(folder, security, scenario, solve_all or out is not None)
    print(story_text(story, every, solve_all))
    if out is None:
        return
    if not len(story.live):
        print("\nno drawing: no right is live on this path")
        return
    from projector.report.story_drawing import story_svg
    from projector.run.one_file import write_whole

    write_whole(out, story_svg(story))
    print(f"\ndrawing: {out}")


def refuse_drawing(folder: Path, out: Path) -> None:
    """A drawing is a file of its own kind, outside the study: nothing else can be overwritten by its name."""
    if out.suffix.lower() != ".svg":
        raise typer.BadParameter(f"--out {out} does not end in .svg; name the drawing's file")
    if out.is_symlink() or out.is_dir():
        raise typer.BadParameter(f"--out {out} is a link or a folder; name the file itself")
    if folder.resolve() in out.resolve().parents:
        raise typer.BadParameter(f"--out {out} lies in the study folder; results never do, choose another place")


def report_writers(results: Any, command: str) -> dict[str, Callable[[Path], None]]:
    """The report's files by name."""
    from projector.report.publish import published
    from projector.run.publish import write_table

    page = published(results, command)
    return {
        "report.html": lambda path: no_value(path.write_text(page.html, encoding="utf-8", newline="\n")),
        "report.xlsx": lambda path: no_value(path.write_bytes(page.workbook)),
        "tables/addresses.parquet": lambda path: write_table("addresses", page.addresses, {}, path),
    }


def no_value(_: object) -> None:
    """Drops a count of bytes written."""


def refuse_target(folder: Path, target: Path, command: str = "run") -> None:
    """Results never land in or over the study, nor over anything that a run has not written.

    command  what is about to write: `value` does not replace the results of a year-end run
    """
    if target.is_symlink():
        raise typer.BadParameter(f"--out {target} is a link; name the folder itself")
    place, study = target.resolve(), folder.resolve()
    if place == study or study in place.parents:
        raise typer.BadParameter(f"--out {target} lies in the study folder; results never do, choose another place")
    if place in study.parents or place == Path.cwd():
        raise typer.BadParameter(f"--out {target} would replace a folder that holds more than results; name a new one")
    if place.exists():
        strange = strange_files(place)
        if strange:
            raise typer.BadParameter(f"--out {target} holds {strange[0]}, which no run wrote; choose a new folder")
        if command == "value" and (place / "tables").exists() and not (place / "tables" / "holdings.parquet").exists():
            raise typer.BadParameter(f"--out {target} holds the results of a run; choose another folder for the tables")


def strange_files(folder: Path) -> list[str]:
    """Names in a folder that its run statement does not list; every name when there is no statement."""
    import json

    if not folder.is_dir():
        return [folder.name]
    names = sorted(p.relative_to(folder).as_posix() for p in folder.rglob("*") if not p.is_dir() or p.is_symlink())
    try:
        statement = json.loads((folder / "run_statement.json").read_text(encoding="utf-8"))
        listed = {subject["name"] for subject in statement["subject"]} | {"run_statement.json"}
    except (OSError, ValueError, KeyError, TypeError):
        listed = set()
    return [name for name in names if name not in listed]


def print_schemas() -> None:
    """The schemas as one JSON text."""
    import json

    from projector.study.schema import study_json_schema
    from projector.study.tableschema import table_schemas

    print(json.dumps({"study.toml": study_json_schema(), "tables": table_schemas()}, indent=2))


class Bar:
    """Progress on the error stream, silent when that is not a terminal."""

    def __enter__(self) -> Bar:
        self.bar: Any = None
        return self

    def __exit__(self, *_: object) -> None:
        if self.bar is not None:
            self.bar.close()

    def show(self, stage: str, done: int, of: int) -> None:
        if not sys.stderr.isatty():
            return
        from tqdm import tqdm

        if self.bar is None:
            self.bar = tqdm(total=of, file=sys.stderr, disable=None, leave=False, bar_format="{desc} {n}/{total}")
        self.bar.total = of
        self.bar.n = done
        self.bar.set_description_str(stage)
        self.bar.refresh()


def main() -> None:
    """Entry point: refusals become one sentence a line and their exit code; anything else is our own fault."""
    from projector.study.errors import IdentityFailed, StudyRefused

    try:
        app()
    except (StudyRefused, IdentityFailed) as refusal:
        print(refusal, file=sys.stderr)
        sys.exit(refusal.exit_code)
    except KeyboardInterrupt:
        print("stopped; nothing was written", file=sys.stderr)
        sys.exit(130)
    except OSError as fault:
        named = f"E190 {fault.filename or 'output'}: {fault.strerror or fault}"
        print(f"{named}; nothing was left half-written.", file=sys.stderr)
        sys.exit(2)
    except Exception as fault:
        import traceback

        frame = traceback.extract_tb(fault.__traceback__)[-1]
        place = f"{Path(frame.filename).name}, line {frame.lineno}"
        print(f"E900 the program itself failed ({type(fault).__name__} at {place}: {fault}).", file=sys.stderr)
        print("Please report this sentence with the version; it holds no data beyond what it says.", file=sys.stderr)
        sys.exit(1)


if __name__ == "__main__":
    main()

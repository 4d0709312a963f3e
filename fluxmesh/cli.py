"""The command line."""

from __future__ import annotations

import contextlib
import gc
import io
import logging
import os
import signal
import sys
import warnings
from pathlib import Path
from typing import Annotated, Any

import typer

from fluxmesh.errors import FluxmeshError, FluxmeshWarning, InputError, PictureError

__all__ = ["app", "balance", "causes", "check", "convergence", "export", "main", "picture", "start"]

app = typer.Typer(
    help="Mass and momentum balance over a closed, tagged surface: loads on hardware, the reaction at the anchor, "
    "and whether the numbers close.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)

CaseFile = Annotated[Path, typer.Argument(metavar="CASE", help="Case file (TOML).", show_default=False)]


def _console(stderr: bool = False) -> Any:
    from typing import IO, cast

    from rich.console import Console

    from fluxmesh.report.plain import Plain

    stream = sys.stderr if stderr else sys.stdout
    # a pipe has no width: use one that holds the tables
    return Console(
        file=cast(IO[str], Plain(stream)), width=None if stream.isatty() else 120, highlight=False, soft_wrap=False
    )


@app.command(epilog="Example: fluxmesh balance meshes/manifold/manifold_fine.toml --out results/manifold")
def balance(
    case: CaseFile,
    out: Annotated[
        Path | None, typer.Option(help="Folder for balance.json and pictures.", show_default="results/<case name>")
    ] = None,
    pictures: Annotated[
        bool, typer.Option("--pictures/--no-pictures", help="Draw the force vectors, and write the report.")
    ] = True,
    draws: Annotated[
        int,
        typer.Option(min=0, max=10_000_000, help="Draws of the doubtful inputs (Monte Carlo).", show_default="none"),
    ] = 0,
    seed: Annotated[int, typer.Option(help="Of the draws: the same seed gives the same figures.")] = 0,
    units: Annotated[str, typer.Option(help="Of the report: si, or us for US customary units beside SI.")] = "si",
) -> None:
    """Balance a case: tables here, balance.json and pictures in a folder.

    A series of instants gives series.json and a chart too; balance.json is that of the largest reaction.
    Exit code 0: done; 1: done, and a balance does not close within the tolerance; 2: the input is at fault.
    """
    from fluxmesh.case.read import read_case
    from fluxmesh.job.ahead import load_ahead

    if units not in ("si", "us"):
        raise typer.BadParameter("give si or us", param_hint="--units")
    read = read_case(case)
    if read.storage is not None and read.storage.is_series():
        raise typer.Exit(_balance_series(read, out or Path("results") / read.name, pictures, units))
    loaded = load_ahead(read)

    from fluxmesh.job.run import REVIEWED_FACES, run_case
    from fluxmesh.report.result import json_bytes
    from fluxmesh.report.whole import require_writable, write_together

    folder = out or Path("results") / read.name
    require_writable(folder)
    done = run_case(read, loaded=loaded)
    if done.surface.face_count <= REVIEWED_FACES:
        from fluxmesh.job.check import with_doubts
        from fluxmesh.job.doubted import with_budget

        done = with_budget(read, with_doubts(read, done, loaded=loaded), draws=draws, seed=seed)
    elif draws or read.flow.reconstruction == "quadratic":
        from fluxmesh.job.doubted import with_budget

        done = with_budget(read, done, draws=draws, seed=seed)
    # pictures of an earlier run would not belong to the figures beside them
    earlier = [folder / name for name in ("vectors.png", "pressure.png", "report.html")]
    path = folder / "balance.json"
    write_together({path: json_bytes(done.data(), str(path))}, earlier)
    _print(done)
    typer.echo(f"\nWritten: {folder / 'balance.json'}")
    if pictures:
        _draw(read, done, folder, units)
    raise typer.Exit(1 if done.verdict.closes is False else 0)


def _balance_series(case: Any, folder: Path, pictures: bool, units: str) -> int:
    """Balance every instant of a series; return the exit code."""
    from fluxmesh.job.check import with_doubts
    from fluxmesh.job.doubted import with_budget
    from fluxmesh.job.governing import governing_instant
    from fluxmesh.job.run import REVIEWED_FACES
    from fluxmesh.job.series import run_series
    from fluxmesh.report.picture_series import draw_series
    from fluxmesh.report.result import json_bytes
    from fluxmesh.report.series import print_series
    from fluxmesh.report.whole import require_writable, write_together

    require_writable(folder)
    done = run_series(case, progress=_instants_done if sys.stderr.isatty() else None)
    at, largest = governing_instant(case, done)
    if largest.surface.face_count <= REVIEWED_FACES:
        largest = with_budget(at, with_doubts(at, largest))
    earlier = [folder / name for name in ("vectors.png", "pressure.png", "series.png", "report.html")]
    results = {"series.json": done.data(), "balance.json": largest.data()}
    write_together({folder / name: json_bytes(data, name) for name, data in results.items()}, earlier)
    _print(largest)
    typer.echo("")
    print_series(
        _console(), done.series, done.verdict, title=done.title, assumptions=done.assumptions, notes=done.notes
    )
    typer.echo(f"\nWritten: {folder / 'series.json'}\nWritten: {folder / 'balance.json'}, of the largest reaction")
    if pictures:
        draw_series(
            done.series,
            folder / "series.png",
            title=done.title,
            tolerance=done.tolerance,
            notes=done.assumptions,
            verdict=done.verdict_words(),
        )
        typer.echo(f"Written: {folder / 'series.png'}")
        _draw(case, largest, folder, units, done.data())
    return 1 if done.verdict.closes is False else 0


def _instants_done(done: int, count: int) -> None:
    typer.echo(f"\r{done} of {count} instants" + ("\n" if done == count else ""), nl=False, err=True)


def _print(done: Any) -> None:
    from fluxmesh.report.terminal import print_balance

    shown = None
    if done.doubt is not None:
        from fluxmesh.assess.doubt.figures import figures
        from fluxmesh.report.doubt import DoubtShown

        sharp = None if done.doubt.sharpened is None else figures(done.doubt.sharpened)
        shown = DoubtShown.of(done.doubt.budget, sharp, done.sharpened_reported, done.doubt.notes)
    print_balance(
        _console(),
        done.balance,
        done.verdict,
        title=done.title,
        surface=done.surface,
        assumptions=done.assumptions,
        notes=done.notes,
        comparison=done.comparison,
        doubts=done.doubts,
        energy=done.energy,
        carried=done.carried,
        losses=done.losses,
        budget=shown,
    )


def _draw(case: Any, done: Any, folder: Path, units: str, series: Any = None) -> None:
    from fluxmesh.job.drawn import draw_results

    for made in draw_results(case, done, folder, units=units, series=series):
        if isinstance(made, PictureError):
            typer.echo(f"No pictures: {made}", err=True)
        else:
            typer.echo(f"Written: {made}")


@app.command(epilog="Example: fluxmesh check meshes/manifold/manifold_fine.toml")
def check(
    case: CaseFile,
    strict: Annotated[bool, typer.Option("--strict", help="Count doubts as errors (exit code 1).")] = False,
) -> None:
    """Say all that is wrong or doubtful in a case before anything is handed on.

    Exit code 0: nothing wrong; 1: doubts, with --strict; 2: the input is at fault.
    """
    from fluxmesh.case.read import read_case
    from fluxmesh.job.check import check_case
    from fluxmesh.report.review import print_review

    review = check_case(read_case(case))
    print_review(_console(), review)
    raise typer.Exit(1 if strict and review.doubts else 0)


@app.command(epilog="Example: fluxmesh causes case.toml --json causes.json")
def causes(
    case: CaseFile,
    json: Annotated[Path | None, typer.Option("--json", help="File for the same as JSON.", show_default=False)] = None,
) -> None:
    """Rank what would explain that a balance does not close, and say which line of the case to change.

    Exit code 0: the balance closes, or cannot be judged; 1: it does not close; 2: the input is at fault.
    """
    from fluxmesh.case.read import read_case
    from fluxmesh.job.ahead import load_ahead

    read = read_case(case)
    of_a_series = read.storage is not None and read.storage.is_series()
    loaded = None if of_a_series else load_ahead(read)

    from fluxmesh.job.causes import causes_of_case
    from fluxmesh.report.causes import causes_data, print_causes

    found = causes_of_case(read, loaded=loaded)
    title = read.title or read.name
    if json is not None:
        from fluxmesh.report.result import write_json

        write_json(causes_data(found, title=title), json)
    print_causes(_console(), found, title=title)
    if json is not None:
        typer.echo(f"\nWritten: {json}")
    raise typer.Exit(1 if found.residual is not None and found.residual > found.tolerance else 0)


@app.command(epilog="Example: fluxmesh convergence coarse.toml medium.toml fine.toml --figure reaction.force")
def convergence(
    cases: Annotated[
        list[Path],
        typer.Argument(metavar="CASE CASE CASE", help="The same flow on three meshes or more.", show_default=False),
    ],
    figures: Annotated[
        list[str] | None,
        typer.Option(
            "--figure",
            help='Key of balance.json, such as "reaction.force.x" or "groups.*.mass_flow"; may be given again.',
            show_default="loads, port flows, volume",
        ),
    ] = None,
    json: Annotated[Path | None, typer.Option("--json", help="File for the same as JSON.", show_default=False)] = None,
) -> None:
    """Say what the meshes leave open in a figure: apparent order, extrapolated value, grid convergence index."""
    from fluxmesh.case.read import read_case
    from fluxmesh.job.convergence import study_of
    from fluxmesh.report.convergence import print_study
    from fluxmesh.report.result import write_json

    study = study_of([read_case(case) for case in cases], figures=figures or ())
    print_study(_console(), study.cases, study.faces, study.sizes, study.figures, study.assumptions)
    if json is not None:
        write_json(study.data(), json)
        typer.echo(f"\nWritten: {json}")


@app.command(epilog="Example: fluxmesh picture meshes/manifold/manifold_fine.toml --to block.svg --view 'from above'")
def picture(
    case: CaseFile,
    to: Annotated[
        Path | None,
        typer.Option(
            help="File to write: .png, or for print .svg or .pdf.", show_default="results/<case name>/picture.png"
        ),
    ] = None,
    view: Annotated[
        str,
        typer.Option(
            help='Where it is seen from: "automatic" (shows all ports), "from +x" (or another axis), "from above", '
            '"from below", or three numbers that point to the viewer, such as "1, -2, 0.5".'
        ),
    ] = "automatic",
    size: Annotated[str, typer.Option(help="Width and height in pixels; on paper a pixel is 0.16 mm.")] = "1600x1200",
    background: Annotated[
        str, typer.Option(help='"white", "transparent", or a light colour such as "#f4f1ea".')
    ] = "white",
    show: Annotated[
        str,
        typer.Option(
            help="Which forces: all, none, or some of pressure, momentum, weight, load, reaction with commas between."
        ),
    ] = "all",
    colours: Annotated[
        str, typer.Option(help="What the colours of the surface tell: its groups, or the gauge pressure.")
    ] = "groups",
) -> None:
    """Draw one picture of a case: its surface with the force vectors, to look at or for print."""
    from fluxmesh.job.picture import picture_of_case

    written = picture_of_case(case, to=to, view=view, size=size, background=background, show=show, colours=colours)
    typer.echo(f"Written: {written}")


@app.command(epilog="Example: fluxmesh export meshes/manifold/manifold_fine.toml --out results/manifold/export")
def export(
    case: CaseFile,
    out: Annotated[
        Path | None, typer.Option(help="Folder for the files.", show_default="results/<case name>/export")
    ] = None,
) -> None:
    """Hand a result to other programs: surface with all face fields and force vectors (.vtp), ledgers (.csv)."""
    from fluxmesh.job.export import export_case

    for written in export_case(case, out=out):
        typer.echo(f"Written: {written}")


@app.command(epilog='Example: fluxmesh start export.vtp --density "880 kg/m^3" --to case.toml')
def start(
    mesh: Annotated[Path, typer.Argument(metavar="MESH", help="Mesh file with the surface.", show_default=False)],
    unit: Annotated[
        str | None, typer.Option(help="Length unit of the file.", show_default="guessed from the size")
    ] = None,
    density: Annotated[
        str | None, typer.Option(help='Density of the fluid, such as "998.2 kg/m^3".', show_default="from the file")
    ] = None,
    gravity: Annotated[
        tuple[float, float, float] | None,
        typer.Option(help="Gravity in m/s², three numbers: 0 0 -9.80665.", metavar="X Y Z", show_default="none"),
    ] = None,
    to: Annotated[
        Path | None,
        typer.Option("--to", help="Case file to write; prints to the terminal by default.", show_default=False),
    ] = None,
) -> None:
    """Propose a commented case for a mesh: groups with roles, arrays with their meaning, what is left to fill in."""
    from fluxmesh.starter import propose_case, write_case

    try:
        proposal = propose_case(mesh, unit=unit, density=density, gravity=gravity, beside=to)
    except InputError as error:
        if error.where:
            raise
        raise type(error)(error.found, str(mesh), error.remedy) from error
    if to is None:
        typer.echo(proposal.text, nl=False)
        return
    write_case(proposal.text, to)
    typer.echo(f"Written: {to}")
    if proposal.missing:
        typer.echo(f"To be filled in: {', '.join(proposal.missing)}")
    if proposal.doubts:
        typer.echo(f"Doubts: {proposal.doubts}; they stand at the head of the case")


def _version(wanted: bool) -> None:
    if wanted:
        from fluxmesh import __version__

        typer.echo(f"fluxmesh {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    version: Annotated[
        bool, typer.Option("--version", help="Print the version.", callback=_version, is_eager=True)
    ] = False,
) -> None:
    del version


def main() -> None:
    """Run the command line; errors of the input end with one message and exit code 2."""
    # A run is short and its memory lies in arrays: looking for cycles while modules load costs a sixth of the start.
    gc.disable()
    if hasattr(signal, "SIGPIPE") and sys.stdout is sys.__stdout__:
        # a reader of our pipe that leaves ends us as it ends any filter: code 1 would say that a balance does not close
        signal.signal(signal.SIGPIPE, signal.SIG_DFL)
    # what libraries warn of (an overflow in damaged input, say) comes back as an error of ours where it matters
    warnings.simplefilter("ignore")
    warnings.simplefilter("once", FluxmeshWarning)
    # and what they log, some with a traceback, is not for the terminal
    logging.getLogger().addHandler(logging.NullHandler())
    warnings.formatwarning = lambda message, *_args, **_options: f"fluxmesh: {message}\n"
    if sys.stdout is None:  # closed by whoever called us
        sys.stdout = open(os.devnull, "w", encoding="utf-8")  # noqa: SIM115
    for stream in (sys.stdout, sys.stderr):
        # a name that the terminal cannot show is no reason to stop
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")
    try:
        try:
            app(prog_name="fluxmesh")
        finally:
            if sys.stdout is not None:
                sys.stdout.flush()
    except FluxmeshError as error:
        _end(str(error))
    except MemoryError:
        _end("the memory does not suffice for this input. A count in a damaged file may ask for far too much")
    except OSError as error:
        # a path that no system call takes, or a terminal or disk that takes no more
        what = f"{error.filename}: " if error.filename is not None else ""
        _end(f"{what}{error.strerror or error}")
    except RecursionError:
        _end("the input is nested too deeply")


def _end(said: str) -> None:
    with contextlib.suppress(OSError, ValueError):
        typer.echo(f"fluxmesh: {said}", err=True)
    if sys.stdout is not None:
        # what is left for a stream that cannot take it must not end in a message of the interpreter
        with contextlib.suppress(OSError, ValueError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    sys.exit(2)

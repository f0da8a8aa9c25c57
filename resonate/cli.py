"""The commands. Results go to stdout, progress to stderr; nothing heavy is imported before it is needed."""

from __future__ import annotations

import io
import json
import os
import sys
import traceback
import warnings
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from resonate import __version__
from resonate.errors import ResonateError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator

    from resonate.body.body import Body
    from resonate.modes.modeset import ModeSet

_OUR_DEFECT = 3
_INTERRUPTED = 130
_ROWS = 24
_WARNING = "warning: "
_SCENE = click.argument("scene", type=click.Path(path_type=Path))
_JSON = click.option("--json", "as_json", is_flag=True, help="Print JSON instead of a table.")


def main(arguments: list[str] | None = None) -> None:
    """Run a command and turn every outcome into an exit code: 0 fine, 1 fault, 2 bad input, 3 our defect."""
    given = sys.argv[1:] if arguments is None else list(arguments)
    debug = "--debug" in given
    if not debug and not sys.warnoptions:
        # What libraries warn of is for whoever mends this program, not for whoever uses it.
        warnings.simplefilter("ignore")
    # A terminal that lacks a letter shows its code instead of stopping the command.
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")
    try:
        with commands.make_context("resonate", [word for word in given if word != "--debug"]) as context:
            commands.invoke(context)
        sys.stdout.flush()
    except KeyboardInterrupt:
        click.echo("stopped", err=True)
        sys.exit(_INTERRUPTED)
    except click.exceptions.Exit as leaving:
        sys.exit(leaving.exit_code)
    except BrokenPipeError:
        # Whoever read our results has seen enough. The interpreter must not try to write the rest at its end.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(0)
    except Exception as error:  # noqa: BLE001 (the last door: whatever is left is our defect)
        if debug:
            traceback.print_exc()
        sys.exit(_explain(error))


def _stopped(error: BaseException | None) -> bool:
    """Whether a person's Ctrl-C lies behind an error: compiled code turns it into another one."""
    while error is not None and not isinstance(error, KeyboardInterrupt):
        error = error.__cause__ or error.__context__
    return error is not None


def _explain(error: Exception) -> int:
    """Say on stderr what is wrong, where, and how to fix it; the exit code."""
    if _stopped(error):
        click.echo("stopped", err=True)
        return _INTERRUPTED
    if isinstance(error, click.ClickException):
        error.show()
        return error.exit_code
    if isinstance(error, MemoryError):
        error = ResonateError(
            what=f"there is not enough memory: {error}" if str(error) else "there is not enough memory",
            where="the take as a whole",
            fix="shorten take.length, lower sound.rate, or use fewer microphones",
        )
    if isinstance(error, ResonateError):
        click.echo(str(error), err=True)
        return error.exit_code
    click.echo(f"resonate has a defect: {type(error).__name__}: {error}", err=True)
    click.echo("  fix:  run it again with --debug and report what it prints, with the scene", err=True)
    return _OUR_DEFECT


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="resonate")
@click.option("--debug", is_flag=True, help="Show the traceback of an error; may stand anywhere.")
def commands(*, debug: bool) -> None:
    """One physical simulation, turned into sound and motion that stay in step."""
    del debug  # main has taken it out


@commands.command()
@_SCENE
@click.option("--out", type=click.Path(path_type=Path), default=Path(), help="Folder for the take [default: here].")
@click.option("--replace", is_flag=True, help="Let a new take replace one of the same name.")
def take(scene: Path, out: Path, *, replace: bool) -> None:
    """Run SCENE once and write the take."""
    from resonate.modes.store import default_store
    from resonate.scene.read import read_scene
    from resonate.take.make import make_take

    wanted = read_scene(scene)
    with _telling() as tell:
        path = make_take(wanted, out=out, replace=replace, store=default_store(), progress=tell)
    click.echo(str(path))
    for line in _summary(path):
        click.echo(line)


def _summary(path: Path) -> Iterable[str]:
    manifest = path / f"{path.name}.json"
    if not manifest.exists():
        return
    facts = json.loads(manifest.read_text(encoding="utf-8"))
    yield f"  events  {facts['events']}"
    sound = facts.get("sound")
    if sound:
        spl, dbfs = sound["levels"]["peak_spl_db"], sound["levels"]["peak_dbfs"]
        yield "  peak    none: it is silent" if spl is None else f"  peak    {spl:.1f} dB SPL, {dbfs:.1f} dBFS"
    yield f"  ledger  closes to {facts['ledger']['residual_share']:.1e} of the energy put in"


@commands.command()
@_SCENE
@_JSON
@click.option(
    "--most",
    type=click.IntRange(min=1),
    help=f"List this many modes of each body, from the lowest  [default: {_ROWS} in a table, all in JSON]",
)
def modes(scene: Path, *, as_json: bool, most: int | None) -> None:
    """List the modes of every body of SCENE.

    Frequency, motion, decay, and what damps each mode. Lines move up (y of the body), across (z), along (x) or
    twist; plates by bending or in-plane; membranes along their normal.
    """
    from resonate.modes.store import default_store
    from resonate.scene.read import read_scene
    from resonate.take.make import solve_bodies
    from resonate.take.survey import placing, survey

    wanted = read_scene(scene)
    with _telling() as tell, placing(wanted):
        bodies = survey(wanted)
        found = solve_bodies(bodies, store=default_store(), progress=tell)
        for note in dict.fromkeys(note for solved in found for note in solved.warnings):
            tell(f"{_WARNING}{note}")
    if as_json:
        listed = [_listed(body, solved, most=most) for body, solved in zip(bodies, found, strict=True)]
        click.echo(json.dumps({"bodies": listed}, indent=2))
        return
    for body, solved in zip(bodies, found, strict=True):
        _print_modes(body, solved, most=most or _ROWS)


def _listed(body: Body, solved: ModeSet, *, most: int | None) -> dict[str, Any]:
    from resonate.modes.kind import motions

    decay, t60, motion = solved.decay, solved.t60_s, motions(body, solved)
    rows = []
    # Slow swinging on springs and cords is motion as a whole, not a mode.
    for number, index in enumerate(range(solved.swing, solved.count)[:most], 1):
        causes = ("material", "thermoelastic", "support", "radiation")
        rows.append(
            {
                "number": number,
                "frequency_hz": float(solved.frequency_hz[index]),
                "motion": motion[index],
                "t60_s": float(t60[index]) if t60[index] < float("inf") else None,
                "damping": {cause: float(getattr(decay, cause)[index]) for cause in causes},
            }
        )
    return {"name": solved.body, "mass_kg": body.inertia.mass_kg, "modes": rows}


def _print_modes(body: Body, solved: ModeSet, *, most: int) -> None:
    from rich.table import Table

    facts = _listed(body, solved, most=most)
    count, heard, rigid = solved.count - solved.swing, solved.heard - solved.swing, solved.rigid.shape[1]
    title = f"{facts['name']}: {facts['mass_kg']:.4g} kg, {_many(count, 'mode')} ({heard} heard)"
    title += f", {_many(rigid, 'rigid motion')}" if rigid else ""
    title += f", {_many(solved.swing, 'swing')} on cords" if solved.swing else ""
    table = Table("mode", "Hz", "motion", "T60 s", "material", "thermal", "support", "radiation", title=title)
    for column in table.columns:
        column.justify = "right"
    for row in facts["modes"]:
        t60 = "-" if row["t60_s"] is None else f"{row['t60_s']:.3g}"
        total = sum(row["damping"].values())
        # Rounding is not a cause.
        causes = [f"{value:.3g}" if value > 1e-9 * total else "0" for value in row["damping"].values()]
        table.add_row(str(row["number"]), f"{row['frequency_hz']:.2f}", row["motion"], t60, *causes)
    table.caption = "damping as decay rates, 1/s: amplitudes fall as exp(-rate t)"
    _print_table(table)
    left = count - len(facts["modes"])
    if left:
        click.echo(f"and {left} more, up to {solved.frequency_hz[-1]:.0f} Hz: --most {count} or --json lists all")


def _many(count: int, what: str) -> str:
    return f"{count} {what}{'' if count == 1 else 's'}"


def _print_table(table: Any) -> None:  # noqa: ANN401 (rich is imported late)
    from rich.console import Console

    # A pipe gets whole lines, a terminal what fits.
    Console(width=None if sys.stdout.isatty() else 160).print(table)


@commands.command()
@click.argument("kind", required=False)
@_JSON
def presets(kind: str | None, *, as_json: bool) -> None:
    """List what a scene can name, of one KIND or all.

    KIND is materials or strikers, told in a table; without it all names are listed.
    """
    from rich.table import Table

    from resonate.scene.presets import list_presets, preset_rows, tables

    if kind is None:
        everything = {name: [preset.name for preset in list_presets(name)] for name in ("materials", "strikers")}
        if as_json:
            click.echo(json.dumps(everything, indent=2))
            return
        for name, names in everything.items():
            click.echo(f"{name} ({len(names)}): {', '.join(names)}")
        return
    rows = preset_rows(kind)
    if as_json:
        known = tables("materials" if kind == "materials" else "strikers")
        click.echo(json.dumps({preset.name: dict(known[preset.name]) for preset in list_presets(kind)}, indent=2))
        return
    table = Table(*rows.headings, title=f"{kind} ({len(rows.rows)})")
    for row in rows.rows:
        table.add_row(*row)
    _print_table(table)


@commands.command()
@click.argument("name", type=click.Path(path_type=Path))
@click.option("--from", "origin", metavar="EXAMPLE", help="Begin with a copy of an example, such as galley_rack.")
def new(name: Path, origin: str | None) -> None:
    """Write a commented scene, NAME.toml, to start from.

    An existing file is never touched.
    """
    from resonate.scene.starter import write_starter

    click.echo(str(write_starter(name, origin=origin)))


@commands.command()
@click.argument("take", type=click.Path(path_type=Path))
@_JSON
@click.option("--again", is_flag=True, help="Run the scene again and lay its sound beside the take's.")
def check(take: Path, *, as_json: bool, again: bool) -> None:
    """Measure again what was written in TAKE.

    Sync, levels, formats, ledger and hashes. A line begins with ok, FAULT, or none where there is nothing to measure.
    """
    from resonate.modes.store import default_store
    from resonate.take.check import check_take

    report = check_take(take, again=again, store=default_store() if again else None)
    if as_json:
        click.echo(json.dumps(report.as_json(), indent=2))
    else:
        for finding in report.findings:
            click.echo(str(finding))
    report.raise_faults()


@commands.command()
@click.argument("what", metavar="TAKE|SCENE", type=click.Path(path_type=Path))
@click.option(
    "--gain-db",
    type=click.FloatRange(-60.0, 20.0),
    default=0.0,
    help="Louder or quieter than the safe start; peaks stay limited.",
)
def play(what: Path, gain_db: float) -> None:
    """Audition a take or a scene, quiet at first.

    A scene is run without writing. Peaks are limited.
    """
    from resonate.take.play import play_path

    with _telling() as tell:
        play_path(what, gain_db=gain_db, progress=tell)


@contextmanager
def _telling() -> Iterator[Callable[[str], None]]:
    """Progress on stderr: a live line on a terminal, only warnings otherwise."""
    if not sys.stderr.isatty():
        yield lambda words: click.echo(words, err=True) if words.startswith(_WARNING) else None
        return
    from rich.console import Console

    console = Console(stderr=True)
    with console.status("reading") as status:

        def tell(words: str) -> None:
            if words.startswith(_WARNING):
                # Above the live line, in the terminal's own width.
                console.print(words, markup=False, highlight=False, soft_wrap=True)
            else:
                status.update(words)

        yield tell


if __name__ == "__main__":
    main()

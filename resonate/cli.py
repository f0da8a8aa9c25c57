"""The commands. Results go to stdout, progress to stderr; nothing heavy is imported before it is needed."""

from __future__ import annotations

import json
import sys
import traceback
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from resonate import __version__
from resonate.errors import ResonateError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from resonate.modes.modeset import ModeSet

_OUR_DEFECT = 3
_INTERRUPTED = 130
_SCENE = click.argument("scene", type=click.Path(path_type=Path))
_JSON = click.option("--json", "as_json", is_flag=True, help="Print JSON instead of a table.")


def main(arguments: list[str] | None = None) -> None:
    """Run a command and turn every outcome into an exit code: 0 fine, 1 fault, 2 bad input, 3 our defect."""
    given = sys.argv[1:] if arguments is None else arguments
    debug = "--debug" in given
    try:
        commands(given, prog_name="resonate", standalone_mode=False)
    except ResonateError as error:
        if debug:
            traceback.print_exc()
        click.echo(str(error), err=True)
        sys.exit(error.exit_code)
    except click.ClickException as error:
        error.show()
        sys.exit(error.exit_code)
    except (KeyboardInterrupt, click.Abort):
        click.echo("stopped", err=True)
        sys.exit(_INTERRUPTED)
    except click.exceptions.Exit as leaving:
        sys.exit(leaving.exit_code)
    except BrokenPipeError:
        sys.stderr.close()
        sys.exit(0)
    except Exception as error:  # noqa: BLE001 (the last door: whatever is left is our defect)
        if debug:
            traceback.print_exc()
        click.echo(f"resonate has a defect: {type(error).__name__}: {error}", err=True)
        click.echo("  fix:  run it again with --debug and report what it prints, with the scene", err=True)
        sys.exit(_OUR_DEFECT)


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="resonate")
@click.option("--debug", is_flag=True, help="Show the traceback of an error.")
def commands(*, debug: bool) -> None:
    """One physical simulation, turned into sound and motion that stay in step."""
    del debug  # looked at by main, wherever it stands


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
        yield f"  peak    {sound['levels']['peak_spl_db']:.1f} dB SPL, {sound['levels']['peak_dbfs']:.1f} dBFS"
    yield f"  ledger  closes to {facts['ledger']['residual_share']:.1e} of the energy put in"


@commands.command()
@_SCENE
@_JSON
def modes(scene: Path, *, as_json: bool) -> None:
    """List the modes of every body of SCENE: frequency, decay, and what damps each."""
    from resonate.body.build import build_body
    from resonate.modes.solve import solve_modes
    from resonate.modes.store import default_store
    from resonate.scene.read import read_scene

    wanted = read_scene(scene)
    store = default_store()
    found: list[tuple[float, ModeSet]] = []
    with _telling() as tell:
        for spec in wanted.bodies:
            tell(f"modes of {spec.name}")
            world = wanted.world
            body = build_body(spec, temperature_k=world.temperature_k, gravity_m_s2=world.gravity_m_s2)
            solved = solve_modes(body, store=store)
            for note in solved.warnings:
                tell(f"warning: {note}")
            found.append((body.inertia.mass_kg, solved))
    if as_json:
        click.echo(json.dumps({"bodies": [_listed(mass, solved) for mass, solved in found]}, indent=2))
        return
    for mass, solved in found:
        _print_modes(mass, solved)


def _listed(mass_kg: float, solved: ModeSet) -> dict[str, Any]:
    decay, t60 = solved.decay, solved.t60_s
    rows = []
    for number, index in enumerate(range(solved.swing, solved.count), 1):
        causes = ("material", "thermoelastic", "support", "radiation")
        rows.append(
            {
                "number": number,
                "frequency_hz": float(solved.frequency_hz[index]),
                "t60_s": float(t60[index]) if t60[index] < float("inf") else None,
                "damping": {cause: float(getattr(decay, cause)[index]) for cause in causes},
            }
        )
    return {"name": solved.body, "mass_kg": mass_kg, "modes": rows}


def _print_modes(mass_kg: float, solved: ModeSet) -> None:
    from rich.table import Table

    facts = _listed(mass_kg, solved)
    heard = solved.heard - solved.swing
    rigid = solved.rigid.shape[1]
    title = f"{facts['name']}: {mass_kg:.4g} kg, {len(facts['modes'])} modes ({heard} heard), {rigid} rigid motions"
    table = Table("mode", "Hz", "T60 s", "material", "thermoelastic", "support", "radiation", title=title)
    for column in table.columns:
        column.justify = "right"
    for row in facts["modes"]:
        t60 = "-" if row["t60_s"] is None else f"{row['t60_s']:.3g}"
        causes = [f"{value:.3g}" for value in row["damping"].values()]
        table.add_row(str(row["number"]), f"{row['frequency_hz']:.2f}", t60, *causes)
    table.caption = "damping as decay rates, 1/s: amplitudes fall as exp(-rate t)"
    _print_table(table)


def _print_table(table: Any) -> None:  # noqa: ANN401 (rich is imported late)
    from rich.console import Console

    # A pipe gets whole lines, a terminal what fits.
    Console(width=None if sys.stdout.isatty() else 160).print(table)


@commands.command()
@click.argument("kind", required=False)
@_JSON
def presets(kind: str | None, *, as_json: bool) -> None:
    """List what can be named in a scene: KIND is materials or strikers; all names without it."""
    from rich.table import Table

    from resonate.scene.presets import list_presets, preset_rows, tables

    if kind is None:
        everything = {name: [preset.name for preset in list_presets(name)] for name in ("materials", "strikers")}
        if as_json:
            click.echo(json.dumps(everything, indent=2, ensure_ascii=False))
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
def new(name: Path) -> None:
    """Write a commented scene NAME.toml to start from; an existing file is never touched."""
    from resonate.scene.starter import write_starter

    click.echo(str(write_starter(name)))


@commands.command()
@click.argument("take", type=click.Path(path_type=Path))
@_JSON
@click.option("--again", is_flag=True, help="Run the scene again and lay its sound beside the take's.")
def check(take: Path, *, as_json: bool, again: bool) -> None:
    """Measure again what was written in TAKE: sync, levels, formats, ledger, hashes."""
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
@click.argument("what", type=click.Path(path_type=Path))
@click.option(
    "--gain-db",
    type=click.FloatRange(-60.0, 20.0),
    default=0.0,
    help="Louder or quieter than the safe start; peaks stay limited.",
)
def play(what: Path, gain_db: float) -> None:
    """Audition WHAT, a take or a scene (which is run without writing). Starts quiet and limits peaks."""
    from resonate.take.play import play_path

    with _telling() as tell:
        play_path(what, gain_db=gain_db, progress=tell)


class _telling:  # noqa: N801 (reads as what it does)
    """Progress on stderr: a live line on a terminal, only warnings otherwise."""

    def __enter__(self) -> Callable[[str], None]:
        self._status: Any = None
        if sys.stderr.isatty():
            from rich.console import Console

            self._status = Console(stderr=True).status("reading")
            self._status.start()
        return self._tell

    def _tell(self, words: str) -> None:
        if words.startswith("warning: "):
            click.echo(words, err=True)
        elif self._status is not None:
            self._status.update(words)

    def __exit__(self, *_: object) -> None:
        if self._status is not None:
            self._status.stop()


if __name__ == "__main__":
    main()

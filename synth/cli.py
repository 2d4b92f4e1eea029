"""The command line: reads arguments, calls the api, prints.  Computes nothing.

Exit status: 0 every judged requirement met; 1 designed, some requirement not met; 2 the input cannot be used.
"""

from __future__ import annotations

import logging
import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from synth.errors import SynthError

if TYPE_CHECKING:
    from synth.api import Design

MET, MISSED, UNUSABLE = 0, 1, 2

app = typer.Typer(
    help="Designs the analog chain that measures a small signal of one frequency, from real parts, with proof.",
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 80},
)
Force = Annotated[bool, typer.Option("--force", help="Replace a folder that is no design or was edited by hand.")]
AsJson = Annotated[bool, typer.Option("--json", help="Print design.json instead of the report.")]
Given = Annotated[str | None, typer.Option(show_default=False)]


@app.callback()
def common(verbose: Annotated[bool, typer.Option("--verbose", help="Log what is done to stderr.")] = False) -> None:
    """Set up logging."""
    level = logging.INFO if verbose else logging.WARNING
    logging.basicConfig(stream=sys.stderr, level=level, format="%(name)s: %(message)s")


@app.command()
def new(
    out: Annotated[Path | None, typer.Option(help="File to write; the terminal if left out.")] = None,
    title: Given = None,
    center_frequency: Given = None,
    bandwidth: Given = None,
    full_scale: Given = None,
    smallest: Given = None,
    output: Given = None,
    gain: Given = None,
    accuracy: Given = None,
    signal_to_noise: Given = None,
    scale: Given = None,
    resistance: Given = None,
    inductance: Given = None,
    capacitance: Given = None,
    corner: Given = None,
    positive: Given = None,
    negative: Given = None,
) -> None:
    """Write a commented starter spec, valid as it stands; what is given is filled in."""
    from synth import api

    given = {
        "title": title,
        "center_frequency": center_frequency,
        "bandwidth": bandwidth,
        "full_scale": full_scale,
        "smallest": smallest,
        "output": output,
        "gain": gain,
        "accuracy": accuracy,
        "signal_to_noise": signal_to_noise,
        "scale": scale,
        "resistance": resistance,
        "inductance": inductance,
        "capacitance": capacitance,
        "corner": corner,
        "positive": positive,
        "negative": negative,
    }
    text = api.starter_spec(**{key: value for key, value in given.items() if value is not None})
    if out is None:
        typer.echo(text, nl=False)
    else:
        api.write_text(out, text)


@app.command()
def design(
    spec: Annotated[Path, typer.Argument(help="Spec file, TOML.", show_default=False, readable=False)],
    out: Annotated[Path | None, typer.Option(help="Folder to write the design into.", show_default=False)] = None,
    builds: Annotated[int, typer.Option(help="Builds to draw; 0 for none.", min=0, max=1_000_000)] = 10_000,
    seed: Annotated[int, typer.Option(help="Seed of every random draw.", min=0)] = 0,
    force: Force = False,
    as_json: AsJson = False,
) -> None:
    """Design a chain for a spec, print the report, write the design folder."""
    from synth import api

    asked = api.load_spec(spec)
    if out is not None:
        api.check_folder(out, asked, force)
    made = api.design(asked, builds, seed)
    if out is not None:
        api.save_design(made, out, force)
    _show(made, as_json)


@app.command()
def check(
    folder: Annotated[Path, typer.Argument(help="Design folder.", show_default=False, readable=False)],
    as_json: AsJson = False,
) -> None:
    """Rebuild the circuit from a folder's design.json alone and judge it anew."""
    from synth import api

    checked = api.check(folder)
    if checked.edited:
        typer.echo("parts were edited by hand since the design was written", err=True)
    _show(checked, as_json)


@app.command()
def parts(
    name: Annotated[
        str | None, typer.Argument(metavar="TYPE", help="Show this part whole.", show_default=False)
    ] = None,
    kind: Annotated[
        str | None, typer.Option(help="op-amps (default), resistors, capacitors or crystals.", show_default=False)
    ] = None,
    min_gbw: Annotated[str | None, typer.Option(help='Least gain-bandwidth product, "10 MHz".')] = None,
    noise_at: Annotated[
        str | None,
        typer.Option("--noise-at", "--max-noise-at", help="Show noise at this frequency, the quietest first."),
    ] = None,
    max_noise: Annotated[
        str | None, typer.Option(help='Largest voltage noise there, "5 nV" (white if no frequency is given).')
    ] = None,
    supply: Annotated[str | None, typer.Option(help='Total supply it must work on, "5 V".')] = None,
    technology: Annotated[str | None, typer.Option(help="bipolar, JFET or CMOS.")] = None,
    catalog: Annotated[list[Path] | None, typer.Option(help="A catalog of your own; repeatable.")] = None,
    check_file: Annotated[
        Path | None, typer.Option("--check", help="Tell all that is wrong in this catalog.", show_default=False)
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="Print JSON instead of a table.")] = False,
) -> None:
    """List parts of the catalogs, show one whole, or check a catalog of your own."""
    from synth import api

    asked = {
        "min_gbw": min_gbw,
        "noise_at": noise_at,
        "max_noise": max_noise,
        "supply": supply,
        "technology": technology,
    }
    if check_file is not None:
        usable, text = api.catalog_text(check_file, as_json)
        typer.echo(text, nl=False, err=not (usable or as_json))
        raise typer.Exit(MET if usable else UNUSABLE)
    if name is not None:
        typer.echo(api.part_text(name, kind, catalog or (), as_json), nl=False)
    else:
        typer.echo(api.parts_text(kind or "op-amps", catalog or (), as_json, **asked), nl=False)


@app.command()
def bom(
    folders: Annotated[list[Path], typer.Argument(help="Design folders.", show_default=False)],
    boards: Annotated[int, typer.Option(help="How many of each are built.", min=1)] = 1,
    as_json: Annotated[bool, typer.Option("--json", help="Print JSON instead of CSV.")] = False,
) -> None:
    """Merge the bills of design folders, as their design.json stands now, into one."""
    from synth import api

    typer.echo(api.merged_bill(folders, boards, as_json), nl=False)


def _show(made: Design, as_json: bool) -> None:
    from synth import api

    typer.echo(api.json_text(made) if as_json else api.report(made), nl=False)
    raise typer.Exit(MET if made.meets_spec else MISSED)


def run(command: Callable[[], object]) -> int:
    """Exit status of a command; an error that a person can act on becomes one message on stderr."""
    try:
        command()
    except SynthError as error:
        typer.echo(f"synth: {error}", err=True)
        return UNUSABLE
    except BrokenPipeError:
        sys.stderr.close()
        return MISSED
    except OSError as error:  # files are the api's business: what is left is the terminal, or where it leads
        typer.echo(f"synth: the output cannot be written: {error.strerror or error}", err=True)
        sys.stdout = None  # what it still holds is not flushed once more
        return UNUSABLE
    return MET


def main() -> None:
    """Entry point of the console script.

    One thread for linear algebra: the matrices are small, and two threads spend their time waiting for each other.
    """
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    sys.exit(run(app))

"""The command ``skipline``: every stage from the command line, NIfTI in and NIfTI out.

Exit codes: 0 done, 1 the work failed, 2 the input was wrong. Imports are lazy: help costs nothing.
"""

from __future__ import annotations

import json
import os
import sys
from pathlib import Path
from typing import Annotated, Any

import typer

from .. import CAUTION, InputError, __version__

app = typer.Typer(
    add_completion=False,
    no_args_is_help=True,
    rich_markup_mode="rich",
    pretty_exceptions_enable=False,
    help="Decide how far an MR scan can be accelerated.\n\n"
    "A study file names a reference, sampling patterns, accelerations, reconstruction methods and limits; "
    "[bold]skipline run[/bold] does all combinations, compares them with the reference and says how far you "
    "may go, and what breaks first.\n\nFor research and protocol prototyping, not for diagnosis.",
    epilog="Begin with: [bold]skipline run first-study[/bold]",
)

StudyFile = Annotated[
    str,
    typer.Argument(
        help="Study file (TOML), or the name of a ready one, such as first-study.", show_default=False
    ),
]
Overrides = Annotated[
    list[str] | None,
    typer.Option("--set", metavar="KEY=VALUE", help="Replace a value of the study file; may be given often."),
]
Workers = Annotated[
    int | None, typer.Option(min=1, help="Processes; by default one a core.", show_default=False)
]
Options = Annotated[
    list[str] | None,
    typer.Option(
        "--option", metavar="KEY=VALUE", help="An option of it, as [bold]skipline list[/bold] tells."
    ),
]
Threads = Annotated[
    int | None, typer.Option(min=1, help="Threads; by default one a core.", show_default=False)
]
Seed = Annotated[int, typer.Option(min=0, help="Seed of all that is random.")]


INTERRUPTED = 130
"""What the command-line library returns, without a word, after Ctrl-C."""


def main() -> None:
    """Run the command line and exit: the entry point of the console command."""
    sys.exit(run_command(sys.argv[1:]))


def run_command(arguments: list[str]) -> int:
    """Run the command line with the given arguments and return the exit code.

    Whatever goes wrong is told in one line on standard error.

    Examples
    --------
    >>> run_command(["--version"])
    skipline 0.1.0
    0
    """
    try:
        code = int(app(arguments, prog_name="skipline", standalone_mode=False) or 0)
        return _complain("stopped", 1) if code == INTERRUPTED else code
    except InputError as error:
        return _complain(str(error), 2)
    except _Failed as error:
        return _complain(str(error), 1)
    except (KeyboardInterrupt, typer.Abort):
        return _complain("stopped", 1)
    except BrokenPipeError:
        # whoever read our output has gone: that is no failure, but nothing more may be written
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except Exception as error:
        if hasattr(error, "format_message"):  # a usage error of the command line itself
            message = error.format_message()  # type: ignore[attr-defined]
            return _complain(message, 2) if message else 0  # no words: help was printed
        return _complain(f"failed: {type(error).__name__}: {error}", 1)


def _warn(message: str) -> None:
    print(f"skipline: warning: {message}", file=sys.stderr)


def _complain(message: str, code: int) -> int:
    print("skipline: " + " ".join(message.split()), file=sys.stderr)
    return code


def _version(asked: bool) -> None:
    if asked:
        print(f"skipline {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and exit.")
    ] = False,
) -> None:
    pass


@app.command(
    epilog="Example: [bold]skipline run first-study --output results/first --set sampling.draws=2[/bold]"
)
def run(
    study: StudyFile,
    output: Annotated[
        Path | None,
        typer.Option(metavar="FOLDER", help="Results folder; by default results/NAME.", show_default=False),
    ] = None,
    workers: Workers = None,
    overrides: Overrides = None,
) -> None:
    """Run a study: all its cases, the tables, the verdict and the report.

    Cases that are finished are not run again, so a stopped study goes on where it was.
    """
    from .study import load_study

    loaded = load_study(_study_path(study), overrides or ())

    from .report import write_report
    from .study import run as run_study

    folder = Path("results") / loaded.name if output is None else output
    try:
        outcome = run_study(loaded, folder, workers)
    except KeyboardInterrupt as stop:
        # caught here, because the command-line library would end without a word
        raise _Failed(str(stop) or "stopped") from None
    report = write_report(folder)
    print(_counted(outcome))
    print(outcome.verdict["sentence"])
    for curve in outcome.verdict["curves"]:
        reached = "none" if curve["acceleration"] is None else f"{curve['acceleration']:g}"
        print("  " + ", ".join(filter(None, [f"{curve['label']}: R = {reached}", curve["condition_label"]])))
    for warning in outcome.verdict["warnings"]:
        _warn(warning)
    print(f"report: {report}")
    if outcome.failed:
        first = outcome.failed[0]
        raise _Failed(f"{len(outcome.failed)} cases failed; the first, {first.case.id}: {first.message}")


class _Failed(Exception):
    """The work was done in part, or not at all; the message says why."""


@app.command(epilog="Example: [bold]skipline check first-study --workers 4[/bold]")
def check(study: StudyFile, workers: Workers = None, overrides: Overrides = None) -> None:
    """Validate a study file; say how many cases it has and what they will cost."""
    from .study import estimate, load_study

    loaded = load_study(_study_path(study), overrides or ())
    print(f"{loaded.about.title}: {estimate(loaded, workers)}")
    for warning in loaded.warnings():
        _warn(warning)


@app.command(
    epilog="Example: [bold]skipline phantom line-pair-slab --output slab.nii.gz --matrix 256,256[/bold]"
)
def phantom(
    name: Annotated[str, typer.Argument(help="Phantom, as [bold]skipline list phantoms[/bold] tells.")],
    output: Annotated[Path, typer.Option(metavar="FILE", help="Image, NIfTI.", show_default=False)],
    matrix: Annotated[str, typer.Option(metavar="NX,NY", help="Matrix.")] = "256,256",
    field_of_view_mm: Annotated[
        str | None, typer.Option(metavar="X,Y", help="Field of view in mm; by default the phantom's.")
    ] = None,
    coils: Annotated[int, typer.Option(min=1, help="Elements of the simulated coil array.")] = 1,
    snr: Annotated[
        float | None, typer.Option(help="Add complex noise; by default none.", show_default=False)
    ] = None,
    seed: Seed = 0,
    kspace: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Also write the k-space, NIfTI.", show_default=False)
    ] = None,
    maps: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Also write the coil maps, NIfTI.", show_default=False)
    ] = None,
) -> None:
    """Write the fully sampled image of a phantom, and its k-space, from its closed form.

    SNR is the mean magnitude inside the noise-free object over the standard deviation of the real part of the
    noise (that of the imaginary part is the same).
    """
    import numpy as np

    from ..phantoms.acquisition import complex_noise
    from .files import check_outputs, write_volume
    from .fourier import to_image
    from .options import validated
    from .study.references import complete, prepare
    from .study.seeds import generator
    from .study.settings import Acquisition, Reference

    check_outputs({"--output": output, "--kspace": kspace, "--maps": maps})
    if maps is not None and coils == 1:
        raise InputError("--maps: one coil has no map here; ask for more with --coils")
    fov = None if field_of_view_mm is None else _numbers(field_of_view_mm, float, "--field-of-view-mm", 2)
    size = _numbers(matrix, int, "--matrix", 2)
    reference = complete(
        validated(Reference, values={"phantom": name, "matrix": size, "field_of_view_mm": fov})
    )
    validated(Acquisition, values={"coils": coils})
    prepared = prepare(reference, coils, None)
    full, image = prepared.kspace, prepared.image
    sigma = 0.0
    if snr is not None:
        sigma = prepared.sigma(_positive(snr, "--snr"))
        full = full + complex_noise(full.shape, sigma, generator(seed, "noise", 0))
        image = to_image(full)[0] if prepared.maps is None else _combined(full, prepared.maps)
    noise = "no noise" if snr is None else f"SNR {snr:g}"
    about = {"Description": f"{name}, {coils} coil{'s' * (coils > 1)}, {noise}", "Sigma": sigma, "Seed": seed}
    write_volume(output, image.astype(np.complex64), prepared.affine, content="image", sidecar=about)
    if kspace is not None:
        write_volume(kspace, full.astype(np.complex64), prepared.affine, content="k-space", sidecar=about)
    if maps is not None and prepared.maps is not None:
        write_volume(maps, prepared.maps, prepared.affine, content="map", sidecar=about)


def _combined(kspace: Any, maps: Any) -> Any:
    import numpy as np

    from .acquired import Acquired
    from .methods.zero_filled import ZeroFilled

    return ZeroFilled().reconstruct(Acquired(kspace, np.ones((1, 1, 1), bool), maps)).image


@app.command(
    epilog="Example: [bold]skipline mask poisson-disc --matrix 1,320,256 --phase-encode yz --acceleration 8 "
    "--constraint calibration=24 --constraint train_length=32 --output mask.nii.gz --table order.tsv "
    "--figure mask.png[/bold]"
)
def mask(
    pattern: Annotated[
        str | None,
        typer.Argument(help="Pattern, as [bold]skipline list patterns[/bold] tells.", show_default=False),
    ] = None,
    output: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Mask, NIfTI.", show_default=False)
    ] = None,
    like: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="The image or k-space that the mask is for.", show_default=False),
    ] = None,
    matrix: Annotated[
        str | None,
        typer.Option(metavar="NX,NY,NZ", help="The same without a file, voxels of 1 mm.", show_default=False),
    ] = None,
    acceleration: Annotated[
        float | None, typer.Option(help="Points of the grid over samples.", show_default=False)
    ] = None,
    phase_encode: Annotated[
        str | None,
        typer.Option(metavar="AXES", help="Undersampled axes, such as y, yz or xy.", show_default=False),
    ] = None,
    constraints: Annotated[
        list[str] | None,
        typer.Option(
            "--constraint",
            metavar="KEY=VALUE",
            help="calibration, calibration_shape, shutter, partial_fourier, largest_gap, skip_conjugates or "
            "train_length, as in a study file; may be given often.",
        ),
    ] = None,
    options: Options = None,
    seed: Seed = 0,
    best_of: Annotated[int, typer.Option(min=1, help="Draws to compare; the best is taken.")] = 1,
    criterion: Annotated[
        str, typer.Option(help="What is best: sidelobe, compensated-peak, compensated-rms or largest-gap.")
    ] = "sidelobe",
    table: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Sampling table for the sequence, TSV.", show_default=False),
    ] = None,
    order: Annotated[str, typer.Option(help="linear, centre-out or interleaved.")] = "linear",
    effective_echo: Annotated[
        int | None, typer.Option(min=1, help="Echo that takes the centre of k-space.", show_default=False)
    ] = None,
    echo_spacing_ms: Annotated[float, typer.Option(help="Time between echoes.")] = 5.0,
    repetition_time_ms: Annotated[float, typer.Option(help="Time between echo trains.")] = 1000.0,
    figure: Annotated[
        Path | None,
        typer.Option(
            metavar="FILE", help="Picture: mask, density, point spread, gaps, order.", show_default=False
        ),
    ] = None,
    judge: Annotated[
        Path | None,
        typer.Option(
            metavar="FILE", help="Judge this mask, NIfTI or TSV, in place of a new one.", show_default=False
        ),
    ] = None,
    threads: Threads = None,
) -> None:
    """Design a sampling mask, or judge one: point spread, gaps, density, order.

    A sampling table says nothing of SAR, nerve stimulation, gradient heating or acoustic limits: the
    scanner's own safety checks stay in force.
    """
    from .design import MaskTask, design, read_design, summary
    from .files import check_outputs
    from .options import parse_value
    from .report.mask_figure import ENDINGS

    # an option may be a file, such as a law
    given = (Path(str(parse_value(option.partition("=")[2]))) for option in options or ())
    check_outputs(
        {"--output": output, "--table": table, "--figure": figure},
        (like, judge, *given),
        {"--table": (".tsv",), "--figure": ENDINGS},
    )
    task = None
    if judge is not None:
        if pattern is not None:
            raise InputError(f"--judge judges {judge}; expected no pattern beside it, not {pattern}")
        if output is not None:
            raise InputError(f"--judge judges {judge} and writes no mask; expected no --output {output}")
        found, name = read_design(judge), judge.name
    elif pattern is None or output is None or acceleration is None:
        raise InputError("expected a pattern, --output and --acceleration; or --judge FILE")
    else:
        from .study.machine import cores

        size = None if matrix is None else _numbers(matrix, int, "--matrix", 3)
        task = MaskTask.of(pattern, like, size, acceleration, phase_encode, constraints or (), options or ())
        found = design(task.pattern, task.sampling, task.shape, seed, best_of, criterion, threads or cores())
        name = pattern
    trains = None
    if table is not None:
        from ..masks.order import echo_trains

        trains = echo_trains(
            found.mask, found.grid.train_length or 1, order=order,  # type: ignore[arg-type]  # checked there
            effective_echo=effective_echo, echo_spacing_ms=echo_spacing_ms,
            repetition_time_ms=repetition_time_ms,
        )  # fmt: skip
    judgement = found.judgement()
    about = {"Pattern": name, "Seed": seed, "Draw": found.draw, "Acceleration": judgement.acceleration}
    if task is not None and output is not None:
        task.write(output, found, about | {"Judgement": judgement.to_dict()})
    if table is not None and trains is not None:
        from ..masks.table import write_table

        write_table(table, trains, about)
    if figure is not None:
        from .report.mask_figure import write_mask_figure

        write_mask_figure(
            figure, found.mask, density=found.density, allowed=found.grid.allowed(), trains=trains, title=name
        )
    print("\n".join(summary(judgement)))
    if trains is not None:
        print(
            f"{int(trains.train.max()) + 1} echo trains of {trains.train_length}, effective echo "
            f"{trains.effective_echo}, largest jump {trains.largest_jump:.3g} grid steps"
        )


@app.command(
    epilog="Example: [bold]skipline recon kspace.nii.gz mask.nii.gz --output image.nii.gz "
    "--method wavelet-sparse --option weight=2[/bold]"
)
def recon(
    kspace: Annotated[Path, typer.Argument(help="Complex k-space, NIfTI; coils are dimension 5.")],
    mask: Annotated[Path, typer.Argument(help="Sampled points, NIfTI: not zero where a sample was taken.")],
    output: Annotated[Path, typer.Option(metavar="FILE", help="Image, NIfTI.", show_default=False)],
    method: Annotated[
        str, typer.Option(help="Method, as [bold]skipline list methods[/bold] tells.")
    ] = "wavelet-sparse",
    maps: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Coil maps, NIfTI; needed for several coils.", show_default=False),
    ] = None,
    sigma: Annotated[
        float | None,
        typer.Option(
            help="Standard deviation of the real part of the noise; by default from the border of k-space.",
            show_default=False,
        ),
    ] = None,
    encoded_axes: Annotated[
        str | None,
        typer.Option(
            metavar="AXES",
            help="Axes of the file that are spatial frequencies: xy for a 2-D multi-slice scan; by default "
            "what its sidecar says, otherwise xyz.",
            show_default=False,
        ),
    ] = None,
    threads: Threads = None,
    options: Options = None,
) -> None:
    """Reconstruct k-space that was undersampled, on a scanner or in retrospect.

    K-space is centred: the zero frequency of an axis of length N is at index N // 2, counted from 0. The
    noise is estimated from the border of k-space unless --sigma is given; detail at the border makes that too
    large (a third to twofold is common), a filter of the raw data makes it far too small.
    """
    import numpy as np

    from .acquired import Acquired, without_full_axes
    from .files import check_outputs, read_volume, write_volume
    from .kspace_file import not_encoded, read_kspace
    from .options import with_options
    from .study.machine import cores

    chosen = with_options("methods", method, options or ())
    check_outputs({"--output": output}, (kspace, mask, maps))
    source = read_kspace(kspace, encoded_axes)
    data = source.data
    points = read_volume(mask, allow_zero=True).data != 0
    if points.ndim != 3:
        raise InputError(f"{mask} has {points.ndim} dimensions; expected a mask (x, y, z)")
    sensitivities = None
    if maps is not None:
        sensitivities = read_volume(maps).data
        sensitivities = sensitivities if sensitivities.ndim == 4 else sensitivities[None]
    if points.shape != data.shape[1:]:
        sizes = [" x ".join(map(str, shape)) for shape in (points.shape, data.shape[1:])]
        raise InputError(f"{mask} is {sizes[0]} and {kspace} is {sizes[1]}; expected the same grid")
    for axis in not_encoded(
        kspace, data.shape, encoded_axes
    ):  # the mask is of slices there, the data of k-space
        if (points != points.take([0], "xyz".index(axis))).any():
            raise InputError(
                f"{mask} differs along {axis}, which {kspace} does not encode; expected the same mask for "
                "every slice"
            )
    acquired = Acquired(data, without_full_axes(points), sensitivities, sigma)
    measured = np.any(data != 0, axis=0)
    empty = np.count_nonzero(points & ~measured) / np.count_nonzero(points)
    outside = np.count_nonzero(measured & ~points) / max(np.count_nonzero(measured), 1)
    for share, what in (
        (empty, "points of the mask hold exactly zero"),
        (outside, "samples lie outside the mask"),
    ):
        if share > 0.01:
            _warn(f"{share:.0%} of the {what}; does {mask} belong to {kspace}?")
    with _busy(f"{method}, {' x '.join(map(str, acquired.shape))}"):
        result = chosen.reconstruct(acquired, threads=threads or cores())
    about = {
        "Description": f"{method} of {kspace.name}",
        "Sources": [str(kspace), str(mask)],
        "Acceleration": acquired.acceleration,
        "Converged": result.converged,
        "Stopped": result.stopped,
        "Iterations": result.iterations,
        "Sigma": result.sigma,
        "SigmaSource": result.sigma_source,
        "Weight": result.weight,
    }
    write_volume(output, result.image, source.affine, content="image", sidecar=about, like=source)
    noise = "" if result.sigma is None else f", sigma {result.sigma:.4g} ({result.sigma_source})"
    print(
        f"acceleration {acquired.acceleration:.4g}, {result.iterations} iterations, {result.stopped}{noise}"
    )
    if not result.converged:
        _warn("not converged: the image is not yet the minimum; give more iterations")


@app.command(
    epilog="Example: [bold]skipline compare reference.nii.gz image.nii.gz --error error.nii.gz[/bold]"
)
def compare(
    reference: Annotated[Path, typer.Argument(help="Fully sampled reference, NIfTI.")],
    image: Annotated[Path, typer.Argument(help="Image to compare with it, NIfTI.")],
    error: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Also write the error map, NIfTI.", show_default=False)
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="Print JSON.")] = False,
) -> None:
    """Compare an image with its reference: every measure, inside the object and overall.

    Magnitudes are compared; an error of the phase alone does not show.
    """
    from ..phantoms.acquisition import support
    from . import plugins
    from .files import agree, check_outputs, read_volume, write_volume
    from .measures import error_map
    from .study.results import finite

    check_outputs({"--error": error}, (reference, image))
    truth, other = read_volume(reference), read_volume(image, allow_zero=True)
    for volume in (truth, other):
        if volume.data.ndim != 3:
            raise InputError(f"{volume.path} has {volume.data.ndim} dimensions; expected an image (x, y, z)")
    if truth.data.shape != other.data.shape:
        sizes = [" x ".join(map(str, volume.data.shape)) for volume in (truth, other)]
        raise InputError(f"{image} is {sizes[1]} and {reference} is {sizes[0]}; expected the same grid")
    if not agree(other.affine_mm, truth.affine_mm, 0.01):
        raise InputError(f"{image} and {reference} lie at different places; expected equal affines")
    inside = support(truth.data)
    measures = {name: plugins.load("measures", name) for name in plugins.measures()}
    found = {name: float(each.compute(truth.data, other.data, inside)) for name, each in measures.items()}
    if error is not None:
        about = {"Description": f"magnitude of {image.name} minus that of {reference.name}"}
        difference = error_map(truth.data, other.data)
        write_volume(error, difference, truth.affine, content="map", sidecar=about, like=truth)
    if as_json:
        print(json.dumps(finite(found | {"caution": CAUTION}), indent=2))
        return
    width = max(map(len, found))
    for name, value in found.items():
        print(f"{name:{width}}  {f'{value:.4f} {measures[name].unit}':12}  {measures[name].description}")


@app.command("list", epilog="Example: [bold]skipline list methods[/bold]")
def list_(
    kind: Annotated[
        str | None,
        typer.Argument(
            help="patterns, phantoms, methods or measures; all when not given.", show_default=False
        ),
    ] = None,
) -> None:
    """List what there is, with the options of each."""
    from .listing import print_listing

    print_listing(kind)


@app.command(epilog="Example: [bold]skipline schema > study.schema.json[/bold]")
def schema() -> None:
    """Print the JSON Schema of the study file, for editors that complete and check as you type."""
    from .study import study_schema

    print(json.dumps(study_schema(), indent=2))


def _study_path(study: str) -> Path:
    """Return the path of a study file; a bare name stands for a ready study."""
    path = Path(study)
    if path.exists() or path.suffix or len(path.parts) > 1:
        return path
    ready = Path(__file__).parent.parent / "configs"
    if (ready / f"{study}.toml").exists():
        return ready / f"{study}.toml"
    names = ", ".join(sorted(file.stem for file in ready.glob("*.toml")))
    raise InputError(f"{study} is neither a file nor a ready study; the ready ones are: {names}")


def _counted(outcome: Any) -> str:
    parts = [f"{outcome.done} cases done"]
    if outcome.skipped:
        parts.append(f"{outcome.skipped} were finished before")
    if outcome.failed:
        parts.append(f"{len(outcome.failed)} failed")
    return ", ".join(parts)


def _numbers(text: str, kind: type, option: str, count: int) -> Any:
    try:
        numbers = tuple(kind(part) for part in text.split(","))
    except ValueError:
        numbers = ()
    if len(numbers) != count:
        raise InputError(f"{option}: expected {count} numbers with commas between them, not {text}")
    return tuple(_positive(number, option) for number in numbers)


def _positive(number: Any, option: str) -> Any:
    if not 0 < number < float("inf"):
        raise InputError(f"{option}: expected a number above 0, not {number}")
    return number


def _busy(what: str) -> Any:
    """Show that something long is going on, on a terminal only."""
    from rich.console import Console

    return Console(stderr=True).status(what)

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
    from .files import write_volume
    from .fourier import to_image
    from .study.references import complete, prepare
    from .study.seeds import generator
    from .study.settings import Reference

    if maps is not None and coils == 1:
        raise InputError("--maps: one coil has no map here; ask for more with --coils")
    fov = None if field_of_view_mm is None else _two(field_of_view_mm, float, "--field-of-view-mm")
    reference = complete(Reference(phantom=name, matrix=_two(matrix, int, "--matrix"), field_of_view_mm=fov))
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
    epilog="Example: [bold]skipline mask variable-density-lines --output mask.nii.gz --like slab.nii.gz "
    "--acceleration 4 --calibration 24 --option power=3[/bold]"
)
def mask(
    pattern: Annotated[str, typer.Argument(help="Pattern, as [bold]skipline list patterns[/bold] tells.")],
    output: Annotated[Path, typer.Option(metavar="FILE", help="Mask, NIfTI.", show_default=False)],
    like: Annotated[
        Path,
        typer.Option(
            metavar="FILE", help="The image or k-space that the mask is for, NIfTI.", show_default=False
        ),
    ],
    acceleration: Annotated[float, typer.Option(help="Points of the grid over samples.", show_default=False)],
    calibration: Annotated[
        int, typer.Option(min=0, help="Width of the fully sampled centre, in samples.")
    ] = 0,
    phase_encode: Annotated[
        str | None,
        typer.Option(metavar="AXES", help="Undersampled axes, such as y, yz or xy.", show_default=False),
    ] = None,
    seed: Seed = 0,
    options: Options = None,
) -> None:
    """Draw a sampling mask."""
    import numpy as np

    from ..masks.grid import Grid
    from .files import phase_encoding, read_volume, write_volume
    from .options import with_options
    from .study.encoding import grid_shape, on_kspace, phase_encode_axes
    from .study.seeds import generator

    drawn = with_options("patterns", pattern, options or ())
    volume = read_volume(like)
    x, y, z = volume.data.shape[-3:]
    axes = phase_encode_axes(phase_encode, drawn.axes, (x, y, z))
    grid = Grid(grid_shape(axes, (x, y, z)), calibration)
    sampled = on_kspace(drawn.draw(grid, acceleration, generator(seed, "mask", 0)), axes)
    achieved = sampled.size / int(sampled.sum())
    about = {
        **phase_encoding(axes),
        "Description": f"{pattern}, acceleration {achieved:g}, seed {seed}",
        "Acceleration": achieved,
    }
    full = np.ascontiguousarray(np.broadcast_to(sampled, (x, y, z)))
    write_volume(output, full, volume.affine, content="mask", sidecar=about, like=volume)
    print(f"{int(sampled.sum())} of {sampled.size} samples, acceleration {achieved:.4g}")


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
    from .files import read_volume, write_volume
    from .kspace_file import read_kspace
    from .options import with_options
    from .study.machine import cores

    chosen = with_options("methods", method, options or ())
    for path in (kspace, mask, maps):
        if path is not None and output.exists() and path.exists() and path.samefile(output):
            raise InputError(f"--output {output} is one of the inputs; expected another file")
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
    import numpy as np

    from ..phantoms.acquisition import support
    from . import plugins
    from .files import read_volume, write_volume
    from .measures import error_map
    from .study.results import finite

    truth, other = read_volume(reference), read_volume(image, allow_zero=True)
    for volume in (truth, other):
        if volume.data.ndim != 3:
            raise InputError(f"{volume.path} has {volume.data.ndim} dimensions; expected an image (x, y, z)")
    if truth.data.shape != other.data.shape:
        sizes = [" x ".join(map(str, volume.data.shape)) for volume in (truth, other)]
        raise InputError(f"{image} is {sizes[1]} and {reference} is {sizes[0]}; expected the same grid")
    if not np.allclose(truth.affine, other.affine, atol=1e-3 * max(truth.voxel_mm)):
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


def _two(text: str, kind: type, option: str) -> Any:
    try:
        first, second = (kind(part) for part in text.split(","))
    except ValueError:
        raise InputError(f"{option}: expected two numbers with a comma between them, not {text}") from None
    return (_positive(first, option), _positive(second, option))


def _positive(number: Any, option: str) -> Any:
    if not 0 < number < float("inf"):
        raise InputError(f"{option}: expected a number above 0, not {number}")
    return number


def _busy(what: str) -> Any:
    """Show that something long is going on, on a terminal only."""
    from rich.console import Console

    return Console(stderr=True).status(what)

"""The tables of a study file, each for one value a key; `sweep` makes many of one.

The fields' descriptions are the manual of the study file: they appear in its JSON Schema.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, Field, field_validator, model_validator
from pydantic_core import PydanticCustomError

from .sweep import SINGLE

Points = Annotated[int, Field(ge=16, le=8192)]
"""Points along an axis of a phantom's matrix; similarity needs 11, and a slice of 8192 fills a memory."""

PhaseEncode = Literal["x", "y", "z", "xy", "xz", "yz"]


class _Table(BaseModel, extra="forbid", frozen=True, strict=True):
    """A table: unknown keys are refused, and so is text where a number is expected."""


def _refusal(key: str, message: str) -> PydanticCustomError:
    return PydanticCustomError("study", "{message}", {"key": key, "message": message})


class About(_Table, frozen=True):
    """What the study is.

    Examples
    --------
    >>> About(title="Line-pair slab", seed=7).seed
    7
    """

    title: Annotated[str, SINGLE] = Field(min_length=1, description="Title, shown in the report.")
    seed: Annotated[int, SINGLE] = Field(
        ge=0, description="Seed of all random numbers: masks and noise are the same whenever it is the same."
    )
    description: Annotated[str, SINGLE] = Field(
        default="", description="What the study is for; shown in the report."
    )


class Reference(_Table, frozen=True):
    """The fully sampled object that every case is compared with.

    Examples
    --------
    >>> Reference(phantom="line-pair-slab", matrix=(256, 256)).kind
    'phantom'
    """

    phantom: str | None = Field(
        default=None, description="Name of a numerical phantom with closed-form k-space."
    )
    image: str | None = Field(
        default=None,
        description="NIfTI volume, real or complex. A relative path is relative to the study file's folder; "
        "given with --set, to the current folder.",
    )
    phase: Annotated[str | None, SINGLE] = Field(
        default=None, description="NIfTI volume with the phase of the image, which is then its magnitude."
    )
    kspace: str | None = Field(
        default=None,
        description="NIfTI volume of fully sampled k-space, centred; several coils need acquisition.maps.",
    )
    encoded_axes: Literal["xy", "xz", "yz", "xyz"] | None = Field(
        default=None,
        description="Axes of the k-space file that are spatial frequencies: xy for a 2-D multi-slice scan. "
        "When not given, EncodedAxes of its sidecar; without one, xyz.",
    )
    matrix: tuple[Points, Points] | None = Field(
        default=None, description="Points along x and y; for phantoms only, 256 x 256 when not given."
    )
    field_of_view_mm: tuple[Annotated[float, Field(gt=0)], Annotated[float, Field(gt=0)]] | None = Field(
        default=None,
        description="Field of view along x and y in mm; for phantoms only, the phantom's own when not given.",
    )
    slices: tuple[Annotated[int, Field(ge=0)], Annotated[int, Field(ge=0)]] | None = Field(
        default=None,
        description="First and last slice (z, counted from 0) of the image to use; all when not given.",
    )

    @model_validator(mode="after")
    def _one_source(self) -> Reference:
        given = [key for key in ("phantom", "image", "kspace") if getattr(self, key) is not None]
        if not given:
            raise _refusal(
                "", "needs a phantom, an image or kspace, for example --set reference.image=volume.nii.gz"
            )
        if len(given) > 1:
            raise _refusal(given[1], f"there is a {given[0]} already; expected one of phantom, image, kspace")
        for key, owner in (
            ("phase", "image"),
            ("encoded_axes", "kspace"),
            ("matrix", "phantom"),
            ("field_of_view_mm", "phantom"),
            ("slices", "image"),
        ):
            if getattr(self, key) is not None and given != [owner]:
                raise _refusal(key, f"goes with {owner} only, not with {given[0]}")
        if self.slices and self.slices[1] < self.slices[0]:
            raise _refusal(
                "slices",
                f"expected [first, last], not [{self.slices[0]}, {self.slices[1]}]: the last is lower",
            )
        return self

    @property
    def kind(self) -> Literal["phantom", "image", "kspace"]:
        """Which source it is."""
        return "phantom" if self.phantom else "image" if self.image else "kspace"

    @property
    def source(self) -> str:
        """The phantom's name or the file's path."""
        return str(getattr(self, self.kind))


class Acquisition(_Table, frozen=True):
    """How the reference is measured.

    Examples
    --------
    >>> Acquisition(snr=float("inf")).snr is None
    True
    """

    coils: int | None = Field(
        default=None,
        ge=1,
        le=128,
        description="Number of coils of a simulated ring array; without this and maps 1, a uniform coil.",
    )
    snr: float | None = Field(
        default=None,
        gt=0,
        description="Mean magnitude of the object / standard deviation of the noise in the real part of the "
        "fully sampled image; no noise when not given, or inf.",
    )
    maps: str | None = Field(
        default=None,
        description="NIfTI volume of complex coil maps (x, y, z, 1, coil); a path as reference.image.",
    )
    noise_draws: Annotated[int, SINGLE] = Field(
        default=1, ge=1, le=10_000, description="Independent draws of the noise."
    )

    @field_validator("snr")
    @classmethod
    def _no_noise(cls, snr: float | None) -> float | None:
        return None if snr == float("inf") else snr


class Sampling(_Table, frozen=True):
    """Which samples are taken; the options of the patterns stand in the same table.

    Examples
    --------
    >>> Sampling(pattern="regular-lines", acceleration=2).acceleration
    2.0
    """

    pattern: str = Field(description="Name of a sampling pattern.")
    phase_encode: PhaseEncode | None = Field(
        default=None,
        description="The axis, or the two axes, that are undersampled. When not given: y for patterns of "
        "lines; for patterns of points yz for a volume, and xy, the plane across a 3-D scan's readout, for "
        "one slice.",
    )
    calibration: int | tuple[int, int] = Field(
        default=0,
        description="Fully sampled lines at the centre of k-space; for points the side of a square, or "
        "[[sides, of a rectangle]].",
    )
    calibration_shape: Literal["rectangle", "ellipse"] = Field(
        default="rectangle", description="The whole calibration block, or the ellipse inscribed in it."
    )
    shutter: bool = Field(
        default=False, description="Take nothing outside the ellipse through the ends of the two axes."
    )
    partial_fourier: float = Field(
        default=1.0, gt=0.5, le=1, description="Fraction of the first phase-encode axis that is taken."
    )
    largest_gap: int | None = Field(
        default=None, ge=1, description="Most positions from a taken line to the next; lines only."
    )
    skip_conjugates: bool = Field(
        default=False, description="Never take both k and -k outside the calibration region."
    )
    train_length: int | None = Field(
        default=None, ge=1, description="Length of the echo trains; the number of samples is a multiple."
    )
    acceleration: float = Field(
        ge=1,
        allow_inf_nan=False,
        description="Points of the phase-encode grid / samples taken, calibration region included.",
    )
    draws: Annotated[int, SINGLE] = Field(
        default=1, ge=1, le=10_000, description="Independent draws of each random mask."
    )

    @field_validator("calibration")
    @classmethod
    def _not_negative(cls, calibration: Any) -> Any:
        if min(calibration if isinstance(calibration, tuple) else (calibration,)) < 0:
            raise ValueError("must be at least 0")
        return calibration


class Limit(_Table, frozen=True):
    """The acceptance bound on a measure; the mean over the draws has to keep it.

    Examples
    --------
    >>> Limit(at_most=0.05).allows(0.04), Limit(at_most=0.05).allows(float("nan"))
    (True, False)
    >>> print(Limit(at_least=0.95))
    at least 0.95
    """

    at_most: Annotated[float | None, SINGLE] = Field(
        default=None, allow_inf_nan=False, description="Highest value allowed."
    )
    at_least: Annotated[float | None, SINGLE] = Field(
        default=None, allow_inf_nan=False, description="Lowest value allowed."
    )

    @model_validator(mode="after")
    def _some_bound(self) -> Limit:
        if self.at_most is None and self.at_least is None:
            raise _refusal("", "needs at_most or at_least, for example { at_most = 0.05 }")
        if self.at_most is not None and self.at_least is not None and self.at_least > self.at_most:
            raise _refusal("at_least", f"is above at_most, so no value is allowed ({self.at_least:g})")
        return self

    def allows(self, value: float) -> bool:
        """Whether `value` is within the limit; NaN never is."""
        return self.slack(value) >= 0

    def slack(self, value: float) -> float:
        """Distance of `value` from the nearest bound, negative outside; NaN gives minus infinity."""
        distances = []
        if self.at_most is not None:
            distances.append(self.at_most - value)
        if self.at_least is not None:
            distances.append(value - self.at_least)
        return min((d if d == d else float("-inf") for d in distances), default=float("inf"))

    def broken_bound(self, value: float) -> float:
        """Return the bound that `value` is outside of, or nearest to."""
        if self.at_least is None or (self.at_most is not None and not value <= self.at_most):
            assert self.at_most is not None
            return self.at_most
        return self.at_least

    def __str__(self) -> str:
        parts = [
            f"{words} {bound:g}"
            for words, bound in (("at least", self.at_least), ("at most", self.at_most))
            if bound is not None
        ]
        return " and ".join(parts)

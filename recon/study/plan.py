"""From a study file to a validated plan: everything that can be refused is refused here, before any work."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from itertools import product
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError

from ... import InputError
from .. import plugins
from ..explain import first_problem, nearest, shown
from . import references
from .cases import Case
from .document import LAW_FILES, Document, Keys, read_document
from .encoding import CONSTRAINTS, Shape, phase_encode_axes, phase_encode_grid
from .settings import About, Acquisition, Limit, Reference, Sampling
from .sweep import combinations

Table = TypeVar("Table", bound=BaseModel)

TABLES = ("study", "reference", "acquisition", "sampling", "reconstruction", "limits")


@dataclass(frozen=True)
class Setting:
    """One combination of a study's object and acquisition, with its samplings."""

    reference: Reference
    acquisition: Acquisition
    samplings: tuple[tuple[Sampling, BaseModel, str], ...]
    digests: references.Digests
    shape: Shape


@dataclass(frozen=True)
class Study:
    """A study that can be run.

    Attributes
    ----------
    about : About
        Title, seed, description.
    settings : tuple of Setting
        Objects and acquisitions, each with the sampling patterns that fit it.
    methods : tuple of (str, BaseModel)
        Reconstruction methods with their options.
    limits : dict of str to Limit
        By the measure's name.
    document : Document
        The study file.

    Examples
    --------
    >>> from pathlib import Path
    >>> import skipline
    >>> file = Path(skipline.__file__).parent / "configs" / "first-study.toml"
    >>> study = load_study(file, ["sampling.acceleration=2", "sampling.draws=1"])
    >>> len(study.cases()) == len(study.settings[0].samplings) * len(study.methods)
    True
    """

    about: About
    settings: tuple[Setting, ...]
    methods: tuple[tuple[str, BaseModel], ...]
    limits: Mapping[str, Limit]
    document: Document

    @property
    def name(self) -> str:
        """Name of the study file without its ending, the usual name of the results folder."""
        return self.document.path.stem

    def cases(self) -> list[Case]:
        """Return the study's cases in the order of its tables, each once."""
        return list({case.id: case for case in self._all_cases()}.values())

    def warnings(self) -> list[str]:
        """Return what can be done but is probably not meant, a sentence each."""
        return [
            warning
            for reference in dict.fromkeys(setting.reference for setting in self.settings)
            for warning in references.warnings(reference)
        ]

    def _all_cases(self) -> Iterator[Case]:
        for setting in self.settings:
            noise_draws = 1 if setting.acquisition.snr is None else setting.acquisition.noise_draws
            for sampling, pattern, law_digest in setting.samplings:
                draws = sampling.draws if getattr(pattern, "random", True) else 1
                for draw, noise_draw, method in product(range(draws), range(noise_draws), self.methods):
                    yield Case(
                        self.about.seed, setting.reference, setting.acquisition, sampling, pattern,
                        *method, draw, noise_draw, setting.digests, law_digest,
                    )  # fmt: skip


def load_study(path: str | Path, overrides: Iterable[str] = ()) -> Study:
    """Read and validate a study file.

    Parameters
    ----------
    path : str or Path
        The study file.
    overrides : iterable of str
        ``key=value`` each, applied before validation: see `document.parse`.

    Returns
    -------
    Study

    Raises
    ------
    InputError
        One line: file, line, table and key, what was wrong, what was expected, the nearest valid choice.

    Examples
    --------
    >>> from pathlib import Path
    >>> import skipline
    >>> file = Path(skipline.__file__).parent / "configs" / "first-study.toml"
    >>> load_study(file, ["study.sede=2"])
    Traceback (most recent call last):
        ...
    skipline.InputError: --set study.sede: is not a key here; did you mean "seed"?
    """
    document = read_document(path, overrides)
    _check_tables(document)
    about = _one(document, ("study",), About, document.values["study"])
    reference_table = document.values["reference"]
    found_references = [
        _placed(document, ("reference", _source_key(reference_table)), references.complete, reference)
        for reference in _tables(document, ("reference",), Reference)
    ]
    acquisitions = _tables(document, ("acquisition",), Acquisition)
    if acquisitions[0].noise_draws > 1 and all(acquisition.snr is None for acquisition in acquisitions):
        raise document.refusal(
            ("acquisition", "noise_draws"), "there is no noise to draw; give an snr as well"
        )
    samplings = _named(document, ("sampling",), "patterns", "pattern", Sampling)
    tables = range(len(document.values["reconstruction"]))
    methods = [
        (i, *method)
        for i in tables
        for method in _named(document, ("reconstruction", i), "methods", "method")
    ]
    limits = _limits(document)
    settings = tuple(
        _setting(document, reference, acquisition, samplings)
        for reference, acquisition in product(found_references, acquisitions)
    )
    for setting, (i, _, _, options) in product(settings, methods):
        check = getattr(options, "check", None)
        if check is not None:
            _placed(document, ("reconstruction", i), check, setting.shape)
    named_methods = tuple((name, options) for _, name, _, options in methods)
    return Study(about, settings, named_methods, limits, document)


def _check_tables(document: Document) -> None:
    """Refuse a table that is missing, unknown, or no table."""
    for name, table in document.values.items():
        if name not in TABLES:
            raise document.refusal((name,), f"is not a table of a study file{nearest(name, TABLES)}")
        if name == "reconstruction":
            if not isinstance(table, list):
                raise document.refusal(
                    (name,), "expected [[reconstruction]], in double brackets: one a method"
                )
            if not all(isinstance(item, dict) for item in table):
                raise document.refusal((name,), f"expected [[reconstruction]] tables, not {shown(table)}")
        elif isinstance(table, list) and all(isinstance(item, dict) for item in table):
            raise document.refusal((name,), f"expected one table, [{name}] in single brackets")
        elif not isinstance(table, dict):
            raise document.refusal((name,), f"expected a table, not {shown(table)}")
    for name in ("study", "reference", "sampling", "reconstruction"):
        if name not in document.values or document.values[name] == []:
            brackets = f"[[{name}]]" if name == "reconstruction" else f"[{name}]"
            raise InputError(f"{document.path}: the table {brackets} is missing")


def _one(document: Document, keys: Keys, model: type[Table], values: Mapping[str, Any]) -> Table:
    """Validate one combination of values of a table."""
    try:
        # strict: the text "4" is no number, and true is not 1
        return model.model_validate(dict(values), strict=True)
    except ValidationError as error:
        way, message = first_problem(error, model)
        raise document.refusal((*keys, *(key for key in way if key != "")), message) from None


def _tables(document: Document, keys: Keys, model: type[Table]) -> list[Table]:
    """Validate all combinations of a table."""
    table = document.values.get(str(keys[0]), {})
    _check_axes(document, keys, table)
    return list(
        dict.fromkeys(_one(document, keys, model, one) for one in combinations(table, model.model_fields))
    )


def _check_axes(document: Document, keys: Keys, table: Mapping[str, Any]) -> None:
    for key, value in table.items():
        if value == []:
            raise document.refusal(
                (*keys, key), "an empty list leaves nothing to run; expected at least one value"
            )


def _named(
    document: Document, keys: Keys, kind: str, name_key: str, base: type[Sampling] | None = None
) -> list[tuple[str, Any, BaseModel]]:
    """Return the combinations of a table that names plug-ins and holds their options.

    An option is accepted when one of the named plug-ins has it, and goes to those that do.
    """
    table: Mapping[str, Any] = document.values
    for key in keys:
        table = table[key]  # type: ignore[index]  # the table's number, for an array of tables
    _check_axes(document, keys, table)
    if name_key not in table:
        raise document.refusal((*keys, name_key), f"is missing; expected one of: {', '.join(_names(kind))}")
    names = table[name_key] if isinstance(table[name_key], list) else [table[name_key]]
    models: dict[str, type[BaseModel]] = {}
    for name in names:
        if not isinstance(name, str):
            raise document.refusal((*keys, name_key), f"expected text in quotes, not {shown(name)}")
        models[name] = _placed(document, (*keys, name_key), plugins.load, kind, name)

    base_fields = base.model_fields if base else {}
    known = {name_key, *base_fields, *(option for model in models.values() for option in model.model_fields)}
    for key in table:
        if key not in known:
            whose = " or ".join(f'"{name}"' for name in models)
            raise document.refusal(
                (*keys, key), f"is not a key here, nor an option of {whose}{nearest(key, known)}"
            )

    found = []
    for name, model in models.items():
        fields = {**model.model_fields, **base_fields}
        own = {key: value for key, value in table.items() if key in fields and key != name_key}
        for values in combinations(own, fields, last="acceleration"):
            option_values = {key: value for key, value in values.items() if key not in base_fields}
            base_values = {key: value for key, value in values.items() if key in base_fields}
            options = _one(document, keys, model, option_values)
            head = _one(document, keys, base, {**base_values, name_key: name}) if base else None
            found.append((name, head, options))
    return found


def _limits(document: Document) -> dict[str, Limit]:
    limits = {}
    for name, values in document.values.get("limits", {}).items():
        keys = ("limits", name)
        measure = _placed(document, keys, plugins.load, "measures", name)
        if not isinstance(values, dict):
            raise document.refusal(
                keys, f"expected {{ at_most = ... }} or {{ at_least = ... }}, not {shown(values)}"
            )
        limit = limits[name] = _one(document, keys, Limit, values)
        better = {"lower": "at_most", "higher": "at_least"}[measure.better]
        if getattr(limit, better) is None:
            raise document.refusal(keys, f"{name} is better when it is {measure.better}; expected {better}")
    return limits


def _setting(
    document: Document,
    reference: Reference,
    acquisition: Acquisition,
    samplings: list[tuple[str, Any, BaseModel]],
) -> Setting:
    """Check that an object, its acquisition and its samplings fit each other."""
    source = ("reference", reference.kind)
    where = ("acquisition", "maps" if acquisition.maps else "coils")
    shape = _placed(document, source, references.shape, reference)
    coils = _placed(document, where, references.coil_count, reference, acquisition)
    _check_window(document, source, shape)
    digests = _placed(document, source, references.digests, reference, acquisition.maps)
    fitted = tuple(
        (_fit(document, sampling, pattern, shape), pattern, _law_digest(document, pattern))
        for _, sampling, pattern in samplings
    )
    return Setting(reference, acquisition.model_copy(update={"coils": coils}), fitted, digests, shape)


def _check_window(document: Document, source: Keys, shape: Shape) -> None:
    """Refuse slices that are smaller than the window of the similarity, which every case is measured with."""
    if "ssim" not in plugins.measures():
        return
    from ..measures.ssim import WINDOW

    if min(shape[:2]) < WINDOW:
        raise document.refusal(
            source, f"slices are {shape[0]} x {shape[1]}; similarity needs at least {WINDOW} x {WINDOW}"
        )


def _law_digest(document: Document, pattern: Any) -> str:
    """Return the digest of the file that a pattern's density law comes from; nothing without one."""
    path = getattr(pattern, "law", "")
    return _placed(document, ("sampling", "law"), references.digest, path) if path.endswith(LAW_FILES) else ""


def _fit(document: Document, sampling: Sampling, pattern: Any, shape: tuple[int, int, int]) -> Sampling:
    """Choose the phase-encode axes, and check that the grid can give the acceleration."""
    axes = _placed(
        document, ("sampling", "phase_encode"), phase_encode_axes, sampling.phase_encode, pattern.axes, shape
    )
    sampling = sampling.model_copy(update={"phase_encode": axes})
    try:
        grid = phase_encode_grid(sampling, shape)
    except InputError as error:
        named = [name for name in CONSTRAINTS if name in str(error)]
        raise document.refusal(("sampling", named[0] if named else "calibration"), str(error)) from None
    _placed(document, ("sampling", "acceleration"), grid.samples, sampling.acceleration)
    return sampling


def _placed(document: Document, keys: Keys, function: Any, *arguments: Any) -> Any:
    """Call a function; what it refuses is refused with the place in the study file."""
    try:
        return function(*arguments)
    except InputError as error:
        raise document.refusal(keys, str(error)) from None


def _source_key(table: Mapping[str, Any]) -> str:
    return next((key for key in ("phantom", "image", "kspace") if key in table), "phantom")


def _names(kind: str) -> list[str]:
    return sorted(getattr(plugins, kind)())

"""Built-in names, and packages that add theirs, installed for the test as files of a distribution."""

import subprocess
import sys
import warnings

import pytest

from skipline import InputError
from skipline.recon import plugins
from skipline.recon.measures import Measure


@pytest.fixture
def install(tmp_path, monkeypatch):
    """Install a package that has these modules and entry points, without pip."""
    plugins._found.cache_clear()

    def put(package: str, source: str, entry_points: dict[str, dict[str, str]]) -> None:
        place = tmp_path / package
        place.mkdir()
        (place / f"{package}.py").write_text(source)
        about = place / f"{package}-1.0.dist-info"
        about.mkdir()
        (about / "METADATA").write_text(f"Metadata-Version: 2.1\nName: {package}\nVersion: 1.0\n")
        lines = []
        for group, points in entry_points.items():
            lines += [f"[{group}]", *(f"{name} = {target}" for name, target in points.items())]
        (about / "entry_points.txt").write_text("\n".join(lines))
        monkeypatch.syspath_prepend(place)

    yield put
    plugins._found.cache_clear()


BIAS = """
from skipline.recon.measures import Measure
def compute(reference, image, support):
    return float(abs(image[support]).mean() - abs(reference[support]).mean())
BIAS = Measure("bias", "lower", "", "mean magnitude that is too much", compute)
"""


def test_every_built_in_name_has_its_kind():
    for name in plugins.patterns():
        pattern = plugins.load("patterns", name)
        assert pattern.name == name
        assert pattern.axes in (1, 2)
        assert callable(pattern.draw)
    for name in plugins.methods():
        method = plugins.load("methods", name)
        assert method.name == name
        assert callable(method.reconstruct)
    for name in plugins.phantoms():
        assert plugins.load("phantoms", name)().name == name
    for name in plugins.measures():
        measure = plugins.load("measures", name)
        assert isinstance(measure, Measure)
        assert measure.name == name


def test_names_that_the_contract_promises():
    assert {"variable-density-lines", "variable-density-points", "regular-lines"} <= set(plugins.patterns())
    assert {"shepp-logan", "shepp-logan-high-contrast", "line-pair-slab"} <= set(plugins.phantoms())
    assert {"zero-filled", "wavelet-sparse"} <= set(plugins.methods())
    assert {"nrmse", "psnr", "ssim"} <= set(plugins.measures())
    assert {"nrmse_overall", "psnr_overall", "ssim_overall"} <= set(plugins.measures())


@pytest.mark.parametrize(
    ("kind", "name", "message"),
    [
        ("measures", "nmrse", 'there is no measure "nmrse"; did you mean "nrmse"?'),
        ("patterns", "regular-line", 'there is no pattern "regular-line"; did you mean "regular-lines"?'),
        ("methods", "xyz", 'there is no method "xyz"; expected one of: zero-filled, wavelet-sparse'),
        ("phantom", "shepp-logan", 'there is no kind "phantom"; did you mean "phantoms"?'),
    ],
)
def test_an_unknown_name_is_refused_with_the_nearest(kind, name, message):
    with pytest.raises(InputError) as refusal:
        plugins.load(kind, name)
    assert str(refusal.value) == message


@pytest.mark.parametrize("kind", ["method", "Methods", "methds"])
def test_the_listing_offers_the_nearest_kind(kind):
    from skipline.recon.listing import print_listing

    with pytest.raises(InputError, match=f'there is no kind "{kind}"; did you mean "methods"'):
        print_listing(kind)


def test_another_package_adds_a_measure(install):
    install("biaspackage", BIAS, {"skipline.measures": {"bias": "biaspackage:BIAS"}})
    assert plugins.measures()[-1] == "bias"
    assert plugins.measures()[0] == "nrmse"
    assert plugins.load("measures", "bias").better == "lower"
    assert plugins.problems() == []
    assert "bias" not in plugins.methods()


@pytest.mark.parametrize(
    ("source", "reason"),
    [
        ("import a_package_that_is_not_there", "ModuleNotFoundError: No module named"),
        ("raise RuntimeError('two\\nlines')", "RuntimeError: two lines"),
        ("", "AttributeError: module 'broken' has no attribute 'BIAS'"),
        ("BIAS = object()", "InputError: it has no name, better, unit, description, compute"),
        (BIAS.replace('"bias"', '"other"'), 'InputError: it calls itself "other"'),
    ],
)
def test_a_plug_in_that_fails_is_reported_and_the_rest_goes_on(install, monkeypatch, source, reason):
    install("broken", source, {"skipline.measures": {"bias": "broken:BIAS"}})
    monkeypatch.delitem(sys.modules, "broken", raising=False)
    with pytest.warns(UserWarning, match='measure "bias" of broken cannot be used'):
        names = plugins.measures()
    assert "bias" not in names
    assert "nrmse" in names
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # said once
        plugins.measures()
        assert plugins.load("measures", "nrmse").name == "nrmse"
    (problem,) = plugins.problems()
    assert problem.startswith('measure "bias" of broken cannot be used: ' + reason)
    assert "\n" not in problem
    with pytest.raises(InputError, match='measure "bias" of broken cannot be used'):
        plugins.load("measures", "bias")


def test_a_name_of_ours_cannot_be_taken(install):
    install("taker", BIAS, {"skipline.measures": {"nrmse": "taker:BIAS"}})
    message = 'measure "nrmse" is claimed by skipline and taker; uninstall or rename one'
    with pytest.warns(UserWarning, match="claimed by"):
        assert "nrmse" not in plugins.measures()
    with pytest.raises(InputError) as refusal:
        plugins.load("measures", "nrmse")
    assert str(refusal.value) == message
    assert plugins.problems() == [message]
    assert plugins.load("measures", "psnr").name == "psnr"


def test_two_packages_cannot_share_a_name(install):
    install("first", BIAS, {"skipline.measures": {"bias": "first:BIAS"}})
    install("second", BIAS, {"skipline.measures": {"bias": "second:BIAS"}})
    with pytest.warns(UserWarning, match="claimed by first and second"):
        assert "bias" not in plugins.measures()
    with pytest.raises(InputError, match="claimed by first and second"):
        plugins.load("measures", "bias")


def test_listing_names_imports_nothing_that_they_stand_for():
    program = (
        "import sys; from skipline.recon import plugins; "
        "plugins.measures(), plugins.methods(), plugins.patterns(), plugins.phantoms(); "
        "ours = ('masks', 'phantoms', 'recon.methods', 'recon.measures'); "
        "heavy = [f'skipline.{name}' for name in ours] + ['numba', 'scipy', 'matplotlib']; "
        "print([name for name in heavy if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"

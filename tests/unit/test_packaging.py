"""What is on disk is in the wheel: an editable install would hide a package that was forgotten."""

import tomllib
from pathlib import Path

ROOT = Path(__file__).parents[2]


def test_every_folder_with_code_is_a_package():
    config = tomllib.loads((ROOT / "pyproject.toml").read_text())["tool"]["setuptools"]
    folders = {
        ".".join(["skipline", *file.parent.relative_to(ROOT).parts])
        for part in ("masks", "phantoms", "recon")
        for file in (ROOT / part).rglob("*.py")
    }
    assert folders | {"skipline", "skipline.configs"} == set(config["packages"])


def test_every_file_that_is_no_code_is_package_data():
    config = tomllib.loads((ROOT / "pyproject.toml").read_text())["tool"]["setuptools"]["package-data"]
    for part in ("masks", "phantoms", "recon", "configs"):
        for file in (ROOT / part).rglob("*"):
            if file.is_file() and file.suffix not in (".py", ".pyc", ".nbi", ".nbc"):
                patterns = config[".".join(["skipline", *file.parent.relative_to(ROOT).parts])]
                assert any(file.match(pattern) for pattern in patterns), file

"""The README is kept true: its commands, its study file, its example."""

import re
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def test_the_study_shown_is_the_first_study():
    shown = re.search(r"### A study file\n+```toml\n(.*?)```", README, re.DOTALL)
    assert shown is not None
    assert shown[1].strip() == (ROOT / "configs" / "first-study.toml").read_text().strip()


def test_the_example_runs():
    example = re.search(r"```python\n(.*?)```", README, re.DOTALL)
    assert example is not None
    done = subprocess.run([sys.executable, "-c", example[1]], capture_output=True, text=True, timeout=120)
    assert done.returncode == 0, done.stderr
    assert "within tolerance" in done.stdout


def test_two_commands_set_themselves_up():
    commands = re.findall(r"^    (python3 -m venv \.venv && .*)$", README, re.MULTILINE)
    assert len(commands) == 2
    assert commands[0].endswith("skipline run configs/first-study.toml")
    assert "pytest" in commands[1]
    script = (ROOT / ".ci" / "run").read_text()
    assert "run configs/first-study.toml" in script
    assert "README.md" in script.split("\ntests=")[1]
    assert "\nexport CI=true" in script


def test_pictures_and_links_are_there():
    for target in re.findall(r"\]\(([^)#]+)\)", README):
        assert (ROOT / target).exists(), target

"""What the front page shows is what the program prints and what CI runs."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from click.testing import CliRunner

from optics.cli import main

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
CASE = "cases/green-bottom-pixel.toml"


def blocks(language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", README, flags=re.MULTILINE | re.DOTALL)


def without_accuracy(text: str) -> list[str]:
    # The errors reached are small random numbers; everything else is a result.
    return [line for line in text.splitlines() if not line.startswith("Accuracy reached")]


def test_the_printed_result_is_current(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    printed = CliRunner().invoke(main, ["budget", CASE])
    assert printed.exit_code == 0
    (shown,) = blocks("text")
    assert without_accuracy(shown) == without_accuracy(printed.stdout)


def test_two_commands_each_do_all_their_setup() -> None:
    job, tests = (block.strip() for block in blocks("sh")[:2])
    for command in (job, tests):
        assert command.startswith("python3 -m venv .venv && .venv/bin/pip install ")
        assert "\n" not in command
    assert job.endswith(f".venv/bin/outcouple budget {CASE}")
    assert ".venv/bin/pytest" in tests


def test_ci_runs_exactly_the_test_command() -> None:
    steps = (ROOT / ".ci" / "run").read_text(encoding="utf-8").splitlines()
    assert f"({blocks('sh')[1].strip()})" in steps


def test_links_lead_somewhere() -> None:
    for page in (ROOT / "README.md", ROOT / "DEVELOPERS.md", *(ROOT / "docs").glob("*.md")):
        text = re.sub(r"\$[^$\n]*\$", "", page.read_text(encoding="utf-8"))  # formulas look alike
        for target in re.findall(r"\]\(([^)#]+)[^)]*\)", text):
            if "://" not in target:
                assert (page.parent / target).exists(), f"{page.name}: {target}"

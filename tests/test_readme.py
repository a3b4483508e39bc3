"""The README's set-up must be what .ci/run runs: two blocks, one command line each."""

from __future__ import annotations

import re
import stat
import subprocess
from pathlib import Path

import pytest

from simkit.cli import COMMANDS
from simkit.study import load_study

ROOT = Path(__file__).resolve().parents[1]
TEXTS = ("README.md", "DEVELOPERS.md", "CHANGELOG.md", ".ci/run", "pyproject.toml")


def sh_blocks() -> list[str]:
    text = (ROOT / "README.md").read_text("utf-8")
    return re.findall(r"^```sh\n(.*?)^```$", text, flags=re.MULTILINE | re.DOTALL)


def test_two_blocks_of_one_command_line() -> None:
    blocks = sh_blocks()
    assert len(blocks) == 2
    for block in blocks:
        assert len(block.strip().splitlines()) == 1
        assert block.startswith("python3 -m venv .venv && ")
        assert "--require-hashes -r requirements.lock" in block


def test_blocks_stand_in_the_section_set_up() -> None:
    text = (ROOT / "README.md").read_text("utf-8")
    section = re.search(r"^## Set up\n(.*?)^## ", text, flags=re.MULTILINE | re.DOTALL)
    assert section is not None
    assert section.group(1).count("```sh\n") == 2


def test_first_block_runs_the_example_and_second_the_tests() -> None:
    run, test = sh_blocks()
    assert ".venv/bin/simkit run studies/creek_gauge.toml" in run
    assert "results/creek_gauge/plots" in run
    assert ".venv/bin/python -m pytest" in test


def test_blocks_are_valid_shell() -> None:
    for block in sh_blocks():
        subprocess.run(["bash", "-n", "-c", block], check=True)


def test_ci_reads_its_second_block_from_the_readme() -> None:
    path = ROOT / ".ci" / "run"
    assert path.stat().st_mode & stat.S_IXUSR
    found = subprocess.run(
        ["bash", "-c", _awk_line(path.read_text("utf-8")) + '; printf %s "$block"'],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
    )
    assert found.stdout.strip() == sh_blocks()[1].strip()


def _awk_line(script: str) -> str:
    return next(line for line in script.splitlines() if line.startswith("block="))


@pytest.mark.parametrize("name", TEXTS)
def test_nothing_tells_to_install_the_other_simkit(name: str) -> None:
    # `simkit` on the public registry is somebody else's project.
    text = (ROOT / name).read_text("utf-8")
    assert not re.search(r"install\s+(-\S+\s+)*[\"']?simkit\b", text)


def test_lock_has_hashes_and_names_no_host() -> None:
    text = (ROOT / "requirements.lock").read_text("utf-8")
    assert "://" not in text
    assert "index-url" not in text
    pins = re.findall(r"^[a-z0-9][\w.\-]*==", text, flags=re.MULTILINE)
    assert len(pins) > 50
    assert len(
        re.findall(r"^[a-z0-9].*==.*\\\n\s+--hash=sha256:", text, flags=re.MULTILINE)
    ) == len(pins)


def test_the_studies_it_shows_are_read(tmp_path: Path) -> None:
    """The first as it stands, the others as parts to add to it."""
    text = (ROOT / "README.md").read_text("utf-8")
    whole, *parts = re.findall(r"^```toml\n(.*?)^```$", text, flags=re.MULTILINE | re.DOTALL)
    assert len(parts) == 4
    path = tmp_path / "study.toml"
    path.write_text(whole, "utf-8")
    assert load_study(path).case_count == 5
    path.write_text("\n".join([whole, *parts]), "utf-8")
    antenna = load_study(path).nominal()
    assert [strip.name for strip in antenna.strips] == [
        "east",
        "west",
        "fin",
        "stub",
        "sag",
        "bow",
    ]
    assert antenna.carrier is not None
    assert antenna.ground is not None
    assert antenna.cable is not None
    assert antenna.converge
    assert [item.name for item in antenna.feedline] == ["pair", "stub", "cable"]


def test_every_command_is_in_its_table() -> None:
    text = (ROOT / "README.md").read_text("utf-8")
    named = re.findall(r"^\| `simkit (\w+) ", text, flags=re.MULTILINE)
    assert named == list(COMMANDS)

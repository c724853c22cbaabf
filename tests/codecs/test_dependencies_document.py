"""docs/dependencies.md names every package of pyproject.toml, with the licence that the installed wheel states."""

from __future__ import annotations

import importlib.metadata
import re
import tomllib
from pathlib import Path
from typing import Any

import pytest

ROOT = Path(__file__).parents[2]
DOCUMENT = (ROOT / "docs" / "dependencies.md").read_text(encoding="utf-8")
PROJECT: dict[str, Any] = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]


def bare(requirement: str) -> str:
    """'numpy>=2.1' -> 'numpy'."""
    return re.split(r"[<>=!~\[; ]", requirement, maxsplit=1)[0]


RUNTIME = [bare(requirement) for requirement in PROJECT["dependencies"]]
TEST = [bare(requirement) for requirement in PROJECT["optional-dependencies"]["test"]]


def section(heading: str) -> str:
    """Text under one heading of the second level."""
    return DOCUMENT.split(f"\n## {heading}\n", 1)[1].split("\n## ", 1)[0]


@pytest.mark.parametrize(
    ("heading", "names"), [("At run time", RUNTIME), ("For tests only", TEST)], ids=["run time", "tests"]
)
def test_the_tables_name_the_packages_of_the_project_and_no_other(heading: str, names: list[str]) -> None:
    listed = re.findall(r"^\| ([\w-]+) [\d.]+ \|", section(heading), re.MULTILINE)
    assert listed == names == sorted(names)


def stated(name: str) -> str:
    """All that a wheel's metadata says of its licence."""
    metadata = importlib.metadata.metadata(name)
    fields = [str(metadata[key]) for key in ("License-Expression", "License") if key in metadata]
    return " ".join(fields + [line for line in metadata.get_all("Classifier") or [] if line.startswith("License")])


@pytest.mark.parametrize("name", RUNTIME)
def test_no_package_needed_at_run_time_is_copyleft(name: str) -> None:
    # Bundled files are another matter, told under "Copyleft inside wheels"; SciPy's whole licence file is its metadata.
    own = stated(name).split("----", 1)[0]
    assert not re.search(r"\bA?L?GPL|\bMPL|General Public|Mozilla|EUPL|CDDL", own)

"""Runs the examples of docs/*.md: ``python tests/document_examples.py``; with ``--write``, writes the generated parts.

Each document's blocks run in order in one new folder, with a configuration folder, and so a site key, of their own:
every block marked ``python``, in one namespace per document; every block marked ``sh`` that begins with ``safecheck``,
command by command, a command that ends in ``# exit N`` being expected to give N. A block marked ``toml`` must be a
plan, or a part of one that fits into a plan. Blocks marked otherwise are for reading.
"""

from __future__ import annotations

import contextlib
import io
import os
import re
import shutil
import subprocess
import sys
import tempfile
import time
import tomllib
import traceback
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parents[1]))

from safecheck.documents import from_mapping
from safecheck.jobs.plans import load_plan
from safecheck.policy.limits import check_limits
from safecheck.policy.plan import Plan
from tests.generated_documents import DOCS, write_all

__all__ = ["Block", "blocks_of", "check_plan", "commands_of", "is_run"]

_BLOCK = re.compile(r"^```(\w*)\n(.*?)^```$", re.MULTILINE | re.DOTALL)
_EXIT = re.compile(r"#\s*exit (\d+)\s*$")
_DEMO = "safecheck demo"

_AROUND: dict[str, Any] = {
    "version": 1,
    "change": {
        "title": "t",
        "declared_by": "r",
        "declared_on": "2026-01-15",
        "compressed_copy": "c",
        "compressed_when": "w",
    },
    "sample": {"drawn": "chosen"},
    "candidates": [{"codec": "jpeg2000", "ratio": 10}],
}
"""What a part of a plan is checked inside of."""


@dataclass(frozen=True, slots=True)
class Block:
    """One fenced block."""

    language: str
    text: str
    line: int


def blocks_of(text: str) -> Iterator[Block]:
    """Yield the fenced blocks of a document."""
    for match in _BLOCK.finditer(text):
        yield Block(match.group(1), match.group(2), text[: match.start()].count("\n") + 1)


def commands_of(block: Block) -> list[tuple[str, int]]:
    """Commands of a block marked sh, continued lines joined, each with the exit code expected."""
    lines = block.text.replace("\\\n", " ").splitlines()
    commands = [line.strip() for line in lines if line.strip() and not line.strip().startswith("#")]
    found = [(command, _EXIT.search(command)) for command in commands]
    return [(_EXIT.sub("", command).strip(), int(code.group(1)) if code else 0) for command, code in found]


def is_run(block: Block) -> bool:
    """Whether a block is an example that must run or be read."""
    return block.language in ("python", "toml") or (block.language == "sh" and block.text.startswith("safecheck"))


def check_plan(text: str, folder: Path) -> None:
    """Read a plan, or a part of one within a small plan."""
    content = tomllib.loads(text)
    if content.keys() >= _AROUND.keys():
        path = folder / "example.toml"
        path.write_text(text, encoding="utf-8")
        load_plan(path)
    else:
        check_limits(from_mapping(Plan, _AROUND | content))


@dataclass(slots=True)
class Runner:
    """Runs documents, one folder each."""

    root: Path
    failures: list[str] = field(default_factory=list)
    demo: Path | None = None
    """Result of the first demonstration; later ones are copied from it."""

    def run_document(self, path: Path) -> None:
        """Run the blocks of one document; after the first that goes wrong the rest is left."""
        folder = self.root / path.stem
        folder.mkdir()
        names: dict[str, Any] = {"__name__": "__main__"}
        for block in filter(is_run, blocks_of(path.read_text(encoding="utf-8"))):
            since = time.monotonic()
            wrong = self._run_block(block, folder, names)
            say(f"{path.name}:{block.line}: {block.language}, {time.monotonic() - since:.1f} s")
            if wrong:
                self.failures.append(f"{path.name}:{block.line}: {wrong}")
                return

    def _run_block(self, block: Block, folder: Path, names: dict[str, Any]) -> str:
        """What went wrong, or ''."""
        if block.language == "sh":
            return next(filter(None, (self._run_command(*each, folder) for each in commands_of(block))), "")
        try:
            if block.language == "toml":
                check_plan(block.text, folder)
            else:
                with contextlib.chdir(folder), contextlib.redirect_stdout(io.StringIO()):
                    exec(compile(block.text, "example", "exec"), names)
        except Exception:  # an example may raise anything
            return traceback.format_exc()
        return ""

    def _run_command(self, command: str, expected: int, folder: Path) -> str:
        """What went wrong with one command, or ''."""
        target = folder / (command.partition("--out ")[2] or "safecheck-demo")
        if command.startswith(_DEMO) and self.demo is not None:
            say(f"  $ {command}  (copied)")
            shutil.copytree(self.demo, target)
            return ""
        say(f"  $ {command}")
        done = subprocess.run(
            ["bash", "-uo", "pipefail", "-c", command], cwd=folder, capture_output=True, text=True, check=False
        )
        if done.returncode != expected:
            return f"{command}: exit {done.returncode}, expected {expected}\n{done.stdout}{done.stderr}"
        if command.startswith(_DEMO):
            self.demo = target
        return ""


def say(line: str) -> None:
    """Print one line at once."""
    sys.stdout.write(f"{line}\n")
    sys.stdout.flush()


def main() -> int:
    """Run all documents; 0 if every example did what it says."""
    since = time.monotonic()
    with tempfile.TemporaryDirectory() as name:
        root = Path(name)
        shim = root / "bin" / "safecheck"
        shim.parent.mkdir()
        shim.write_text(f'#!/bin/sh\nexec "{sys.executable}" -m safecheck "$@"\n', encoding="utf-8")
        shim.chmod(0o755)
        os.environ["PATH"] = f"{shim.parent}{os.pathsep}{os.environ['PATH']}"
        os.environ["XDG_CONFIG_HOME"] = str(root / "config")
        runner = Runner(root)
        for path in sorted(DOCS.glob("*.md")):
            runner.run_document(path)
    for failure in runner.failures:
        say(f"\nNOT AS WRITTEN: {failure}")
    say(f"{len(runner.failures)} examples not as written, {time.monotonic() - since:.0f} s")
    return 1 if runner.failures else 0


if __name__ == "__main__":
    if sys.argv[1:] == ["--write"]:
        write_all()
    else:
        sys.exit(main())

"""The code blocks of README and docs run, page by page, in a folder of their own."""

import json
import os
import re
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
PAGES = [ROOT / "README.md", *sorted((ROOT / "docs").glob("*.md"))]
BLOCK = re.compile(r"^```(\w+)\n(.*?)^```$", re.MULTILINE | re.DOTALL)


def test_there_are_pages():
    assert len(PAGES) > 5


@pytest.mark.parametrize("page", PAGES, ids=lambda p: p.name)
def test_blocks_run(page, tmp_path):
    shutil.copytree(ROOT / "studies", tmp_path / "studies")
    environment = {**os.environ, "PATH": f"{Path(sys.executable).parent}:{os.environ['PATH']}"}
    for kind, code in BLOCK.findall(page.read_text(encoding="utf-8")):
        if kind == "toml":
            tomllib.loads(code)
        elif kind == "json":
            json.loads(code)
        elif kind in ("sh", "python") and not code.startswith("python3 -m venv"):
            command = ["bash", "-euo", "pipefail", "-c", code]
            if kind == "python":
                command = [sys.executable, "-c", code]
            done = subprocess.run(
                command, check=False, cwd=tmp_path, env=environment, capture_output=True, text=True
            )
            assert done.returncode == 0, f"{code}\n{done.stdout}\n{done.stderr}"


@pytest.mark.parametrize("page", PAGES, ids=lambda p: p.name)
def test_links_lead_somewhere(page):
    for target in re.findall(r"\]\(([^)#:]+)\)", page.read_text(encoding="utf-8")):
        assert (page.parent / target).exists(), target

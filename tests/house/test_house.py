"""The house rules: floors, the doorway, light help, nothing global, nothing too long."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest
from click import Context, Option

import wideberth
from wideberth.cli import main

ROOT = Path(__file__).parents[2]
SOURCE = ROOT / "src" / "wideberth"
FLOORS = {
    "errors": 0,
    "progress": 0,
    "seeds": 0,
    "study": 1,
    "quadratic": 2,
    "fit": 3,
    "surface": 4,
    "decide": 5,
    "plan": 6,
    "uncertainty": 7,
    "operate": 8,
    "rehearse": 9,
    "chain": 10,
    "report": 11,
    "cli": 12,
    "desk": 12,
}
COMMANDS = (
    "start",
    "check",
    "plan",
    "fit",
    "shape",
    "recommend",
    "frontier",
    "uncertainty",
    "window",
    "robustness",
    "next",
    "memo",
)
HEAVY = (
    "numpy",
    "scipy",
    "pandas",
    "statsmodels",
    "cvxpy",
    "matplotlib",
    "pydantic",
    "jinja2",
    "openpyxl",
    "xlsxwriter",
)
PRESENTING = ("matplotlib", "click", "jinja2")


def _imports(path):
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from ((alias.name, node.lineno) for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield node.module, node.lineno


def _room(path):
    first = path.relative_to(SOURCE).parts[0]
    return first.removesuffix(".py")


def _modules():
    return [path for path in sorted(SOURCE.rglob("*.py")) if path != SOURCE / "__init__.py"]


@pytest.mark.parametrize("path", _modules(), ids=lambda p: str(p.relative_to(SOURCE)))
def test_a_module_imports_only_from_its_own_floor_and_below(path):
    own = FLOORS[_room(path)]
    for module, line in _imports(path):
        if module.startswith("wideberth."):
            room = module.split(".")[1]
            allowed = FLOORS[room] < own or room == _room(path)
            assert allowed, f"{path.name}:{line} imports {module}"
        if own < FLOORS["report"]:
            assert module.split(".")[0] not in PRESENTING, f"{path.name}:{line} imports {module}"


@pytest.mark.parametrize("path", _modules(), ids=lambda p: str(p.relative_to(SOURCE)))
def test_no_module_touches_global_random_state(path):
    text = path.read_text(encoding="utf-8")
    assert "import random" not in text
    for word in ("np.random.seed", "np.random.rand", "np.random.normal", "default_rng()"):
        assert word not in text


def test_files_stay_readable():
    files = [*SOURCE.rglob("*.py"), *(ROOT / "tests").rglob("*.py")]
    long = [str(p) for p in files if len(p.read_text(encoding="utf-8").splitlines()) > 500]
    assert long == []


def test_the_doorway_offers_what_it_declares():
    assert wideberth.__all__ == sorted(wideberth.__all__)
    assert set(wideberth._HOMES) == set(wideberth.__all__)
    for name in wideberth.__all__:
        assert getattr(wideberth, name).__name__ == name
    with pytest.raises(AttributeError, match="wideberth has no"):
        _ = wideberth.nothing


def test_the_step_fit_stays_the_step_after_its_room_was_imported():
    code = (
        "import wideberth.fit.records, wideberth as wb; assert callable(wb.fit);"
        "from wideberth.fit.models import fit; assert wb.fit is fit;"
        "import wideberth.uncertainty.records; assert callable(wb.uncertainty)"
    )
    subprocess.run([sys.executable, "-c", code], check=True)


def _loaded(code):
    script = f"import sys\n{code}\nprint(' '.join(m.split('.')[0] for m in sys.modules))"
    done = subprocess.run(
        [sys.executable, "-c", script], check=True, capture_output=True, text=True
    )
    return set(done.stdout.strip().splitlines()[-1].split())


@pytest.mark.parametrize("arguments", [(), *((command,) for command in COMMANDS)])
def test_help_is_light(arguments):
    called = f"main({[*arguments, '--help']!r})"
    code = f"from wideberth.cli import main\ntry: {called}\nexcept SystemExit: pass"
    assert not _loaded(code) & set(HEAVY)


def test_the_doorway_is_light():
    assert not _loaded("import wideberth") & set(HEAVY)


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help_and_its_options_in_the_docs(command):
    found = main.get_command(Context(main), command)
    assert found.help
    page = (ROOT / "docs" / "commands.md").read_text(encoding="utf-8")
    section = page.split(f"## {command}\n")[1].split("\n## ")[0]
    for option in found.params:
        if isinstance(option, Option):
            assert f"`{option.opts[-1]}" in section


def test_top_level_is_as_agreed():
    done = subprocess.run(
        ["git", "-C", str(ROOT), "ls-files"], check=True, capture_output=True, text=True
    )
    names = {line.split("/")[0] for line in done.stdout.splitlines()}
    agreed = {"README.md", "DEVELOPERS.md", "pyproject.toml", "src", "tests", "studies", "docs"}
    assert {name for name in names if not name.startswith(".")} <= agreed


def test_version_heads_the_changelog():
    page = (ROOT / "docs" / "changelog.md").read_text(encoding="utf-8")
    assert f"## Unreleased (will be {wideberth.__version__})" in page

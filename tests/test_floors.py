"""The house stands as DEVELOPERS.md says: imports go one way, pure floors stay pure, every module has its tests."""

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
PACKAGE = ROOT / "hvhost"
FLOORS = ("words", "wire", "bench", "samples", "plan", "guard", "supervisor", "record", "measure", "report", "publish",
          "ports", "daemon", "cli")
BESIDE = {"standin": {"wire", "words"}, "speed": set(FLOORS) | {"standin"},
          "client": {"words", "wire", "record", "report", "publish"}}
# beside the floors above it, a floor may use these
ALSO = {"cli": {"standin", "speed"}}
PURE = ("words", "wire", "bench", "samples", "plan", "guard", "supervisor", "measure", "report")
FORBIDDEN = {"asyncio", "serial", "aiomqtt", "rich", "pyarrow", "threading", "socket", "selectors", "subprocess"}
CLOCKS = {("time", "time"), ("time", "monotonic"), ("time", "time_ns"), ("time", "monotonic_ns"),
          ("time", "perf_counter"), ("datetime", "now"), ("datetime", "utcnow"), ("date", "today")}
LONGEST = 70


def modules() -> list[Path]:
    """Every module of the package."""
    return sorted(PACKAGE.rglob("*.py"))


def floor_of(path: Path) -> str:
    """The floor on which a module stands; '' for the package's own two files."""
    relative = path.relative_to(PACKAGE)
    return relative.parts[0] if len(relative.parts) > 1 else "" if relative.stem.startswith("__") else relative.stem


def imports_of(tree: ast.AST) -> set[str]:
    """Every module that is imported anywhere in a file, by its full name."""
    found: set[str] = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            found |= {node.module} | {f"{node.module}.{alias.name}" for alias in node.names}
    return found


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_a_module_imports_only_from_the_floors_above_its_own(path: Path) -> None:
    """Data flows one way down the floors; what stands beside them knows only what it may."""
    floor = floor_of(path)
    if not floor:
        return
    parts = {name.split(".")[1] for name in imports_of(ast.parse(path.read_text())) if name.startswith("hvhost.")}
    used = {part for part in parts if (PACKAGE / part).is_dir() or (PACKAGE / f"{part}.py").exists()}
    allowed = BESIDE[floor] if floor in BESIDE else set(FLOORS[: FLOORS.index(floor)]) | ALSO.get(floor, set())
    assert used <= allowed | {floor}


@pytest.mark.parametrize("floor", PURE)
def test_a_pure_floor_knows_no_loop_no_port_no_screen_and_no_clock(floor: str) -> None:
    """Everything that decides is handed the time and the bytes; it never asks for them."""
    for path in sorted((PACKAGE / floor).rglob("*.py")):
        tree = ast.parse(path.read_text())
        roots = {name.split(".")[0] for name in imports_of(tree)}
        assert not roots & FORBIDDEN, f"{path.name} imports {roots & FORBIDDEN}"
        asked = {(node.value.id, node.attr) for node in ast.walk(tree)
                 if isinstance(node, ast.Attribute) and isinstance(node.value, ast.Name)} & CLOCKS
        assert not asked, f"{path.name} asks a clock: {asked}"


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_no_function_is_longer_than_seventy_lines(path: Path) -> None:
    """A function fits on one screen."""
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            length = (node.end_lineno or node.lineno) - node.lineno + 1
            assert length <= LONGEST, f"{path.name}:{node.lineno} {node.name} has {length} lines"


def test_the_top_level_is_the_one_that_was_agreed() -> None:
    """README, DEVELOPERS, pyproject, LICENSE and four folders; nothing else but dotfiles."""
    wanted = {"README.md", "DEVELOPERS.md", "pyproject.toml", "LICENSE", "hvhost", "firmware_protocol", "tests",
              "configs"}
    made = {"runs", "build", "dist"}  # by running and installing, never committed
    found = {path.name for path in ROOT.iterdir()
             if not path.name.startswith(".") and not path.name.endswith(".egg-info")}
    assert found - made == wanted

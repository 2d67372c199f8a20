"""Imports run one way: files and the command line at the top, acquisitions at the bottom."""

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]

# A module may import from its own layer and from the layers below it.
LAYERS = [
    {"errors", "validation", "kernels"},
    {"acquisition"},
    {"likelihoods"},
    {"problem"},
    {"diagnostics", "result"},
    {"solvers"},
    {"weights"},
    {"uncertainty", "sampling"},
    {"imaging", "instrument"},
    {"fit"},
    {"simulate", "files", "testing"},
    {"report", "bundled"},
    {"cli"},
]
# These stand beside the solvers: they know acquisitions (and, for testing, the contracts) and no more.
LIMITED = {
    "simulate": {"errors", "validation", "kernels", "acquisition", "simulate"},
    "files": {"errors", "validation", "acquisition", "files", "diagnostics", "imaging"},
    "testing": {"errors", "validation", "likelihoods", "testing"},
}
MAY_IMPORT_PRIORS = {"problem", "cli"}


def imported(path: Path) -> set[str]:
    """Return the dotted names a file imports, at any depth of its code."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            names.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path} uses a relative import"
            names.add(node.module)
            names.update(f"{node.module}.{alias.name}" for alias in node.names)
    return names


def part(name: str) -> str | None:
    """Return the part of the engine a dotted name belongs to."""
    pieces = name.split(".")
    return pieces[1] if pieces[0] == "recon" and len(pieces) > 1 else None


def sources(package: str) -> list[Path]:
    return sorted((ROOT / package).rglob("*.py"))


def level(name: str) -> int:
    return next(i for i, layer in enumerate(LAYERS) if name in layer)


@pytest.mark.parametrize("path", sources("priors"), ids=lambda p: p.name)
def test_priors_never_import_the_engine(path: Path) -> None:
    assert not {name for name in imported(path) if name.split(".")[0] == "recon"}


@pytest.mark.parametrize("path", sources("recon"), ids=lambda p: str(p.relative_to(ROOT)))
def test_the_engine_imports_downwards(path: Path) -> None:
    relative = path.relative_to(ROOT / "recon")
    own = relative.parts[0].removesuffix(".py")
    if own == "__init__":
        return  # hands out names lazily
    known = set().union(*LAYERS)
    assert own in known, f"recon/{own} has no layer; give it one in this test"
    used = {part(name) for name in imported(path)} & known
    above = {name for name in used if level(name) > level(own)}
    assert not above, f"{relative} imports {above} from above it"
    if own in LIMITED:
        assert used <= LIMITED[own], f"{relative} imports {used - LIMITED[own]}"
    if own not in MAY_IMPORT_PRIORS:
        assert not {name for name in imported(path) if name.split(".")[0] == "priors"}


def test_the_top_level_holds_the_house_and_nothing_else() -> None:
    allowed = {"README.md", "DEVELOPERS.md", "pyproject.toml", "recon", "priors", "tests", "data"}
    present = {p.name for p in ROOT.iterdir() if not p.name.startswith(".")}
    assert (
        present - {"build", "dist", "fewcount-out"} - {p for p in present if p.endswith(".egg-info")}
        == allowed
    )


def test_only_the_command_line_prints() -> None:
    for path in sources("recon") + sources("priors"):
        if path.relative_to(ROOT).parts[1].startswith("cli"):
            continue
        calls = [n for n in ast.walk(ast.parse(path.read_text())) if isinstance(n, ast.Call)]
        assert not [c for c in calls if getattr(c.func, "id", "") == "print"], path

"""The direction of imports: a room imports only from rooms before it."""

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

SOURCE = Path(__file__).parent.parent / "src" / "quarterturn"
ORDER = [
    "errors", "units", "notation", "actions", "lattice", "compiled", "sampling", "imaginary", "saddles", "estimates",
    "records", "reports", "runs", "magics", "cli",
]  # fmt: skip
NEVER = {
    "imaginary": {"lattice", "compiled", "sampling"},
    "saddles": {"lattice", "compiled", "sampling"},
    "estimates": {"actions", "compiled", "sampling", "imaginary", "saddles"},
}


def rooms_imported_by(path: Path) -> Iterator[str]:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        names: list[str] = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path.name} imports relatively"
            names = [f"{node.module}.{alias.name}" for alias in node.names]
        yield from (name.split(".")[1] for name in names if name.startswith("quarterturn."))


def files_of(room: str) -> list[Path]:
    single = SOURCE / f"{room}.py"
    return [single] if single.exists() else sorted((SOURCE / room).rglob("*.py"))


@pytest.mark.parametrize("room", ORDER)
def test_a_room_imports_only_from_rooms_before_it(room: str) -> None:
    files = files_of(room)
    assert files, f"there is no room {room}"
    allowed = set(ORDER[: ORDER.index(room) + 1]) - NEVER.get(room, set())
    for path in files:
        strangers = set(rooms_imported_by(path)) & set(ORDER) - allowed
        assert not strangers, f"{path.relative_to(SOURCE)} imports {sorted(strangers)}"


def test_every_room_is_in_the_order() -> None:
    rooms = {p.name for p in SOURCE.iterdir() if (p / "__init__.py").exists()}
    assert rooms - set(ORDER) == {"notebooks"}

"""What several unit tests need."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from tbkit.errors import InputError

Refusal = Callable[[Callable[[Path], object], str | bytes], str]


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with one good source file and some that are none; the current one, since messages show paths as given."""
    for name in ("d.v", "notes.txt", "old.vhd"):
        (tmp_path / name).touch()
    (tmp_path / "rtl").mkdir()
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def refusal(folder: Path) -> Refusal:
    """What a reader says about a file ``x.yaml`` with the given content."""

    def of(read: Callable[[Path], object], content: str | bytes) -> str:
        (folder / "x.yaml").write_bytes(content if isinstance(content, bytes) else content.encode())
        with pytest.raises(InputError) as caught:
            read(Path("x.yaml"))
        return str(caught.value)

    return of

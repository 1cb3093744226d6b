"""Compiled code: text of plain functions, decorated, written to a user cache folder, compiled there once by numba."""

from __future__ import annotations

import hashlib
import importlib.util
import os
import sys
import tempfile
from pathlib import Path
from types import ModuleType

MARK = "# --- compiled below ---"


def cache_folder() -> Path:
    """Folder of the compiled modules: DETUNE_CACHE, else XDG_CACHE_HOME/detune, else ~/.cache/detune.

    Where none of them can be written, a folder of this user in the temporary directory.
    """
    stated = os.environ.get("DETUNE_CACHE")
    base = Path(os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache") / "detune"
    folder = Path(stated) if stated else base
    try:
        folder.mkdir(mode=0o700, parents=True, exist_ok=True)
        if os.access(folder, os.W_OK):
            return folder
    except OSError:
        pass
    return Path(tempfile.mkdtemp(prefix="detune-kernels-"))


def decorated(texts: list[str], decorator: str) -> str:
    """The functions of texts (what stands below the mark of a file), each with the decorator on a line before it."""
    body = "\n".join(text.split(MARK, 1)[-1] for text in texts)
    lines = (f"{decorator}\n{line}" if line.startswith("def ") else line for line in body.splitlines())
    return "\n".join(lines) + "\n"


def module_file(name: str, text: str) -> Path:
    """Path of a generated module; its name carries a hash of the text."""
    digest = hashlib.sha256(text.encode()).hexdigest()[:16]
    return cache_folder() / f"{name}_{digest}.py"


def is_ready(path: Path) -> bool:
    """Whether a module was compiled before, by this version of the program."""
    return path.with_suffix(".ready").exists()


def mark_ready(path: Path) -> None:
    """Note that a module has been compiled, so that nobody is told again."""
    path.with_suffix(".ready").touch()


_loaded: dict[str, ModuleType] = {}


def load(path: Path, text: str) -> ModuleType:
    """The module of a text, written first where it is not there yet."""
    if path.name in _loaded:
        return _loaded[path.name]
    if not path.exists():
        # Another process may write the same file: an atomic rename leaves either text whole.
        part = path.with_suffix(f".{os.getpid()}.part")
        part.write_text(text, encoding="utf-8")
        part.replace(path)
    spec = importlib.util.spec_from_file_location(path.stem, path)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[path.stem] = module
    spec.loader.exec_module(module)
    _loaded[path.name] = module
    return module

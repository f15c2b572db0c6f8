"""A place for compiled kernels where neither the package folder nor the home folder can be written.

numba keeps compiled kernels beside the source file, else in the user's cache folder. Where both are read-only it
raises at import, so a private folder in the system's temporary folder is named before numba is first imported.
"""

from __future__ import annotations

import os
import stat
import tempfile
from pathlib import Path


def choose_kernel_cache() -> None:
    """Name a private, writable cache folder in ``NUMBA_CACHE_DIR`` if numba would find none by itself."""
    if os.environ.get("NUMBA_CACHE_DIR") or os.access(Path(__file__).parent, os.W_OK) or _home_is_writable():
        return
    os.environ["NUMBA_CACHE_DIR"] = str(_private_folder())


def _home_is_writable() -> bool:
    try:
        home = Path.home()
    except RuntimeError:
        return False
    return home.is_dir() and os.access(home, os.W_OK)


def _private_folder() -> Path:
    """A folder that only this user can write: cached kernels are code, so nobody else may plant them there."""
    user = os.getuid() if hasattr(os, "getuid") else 0
    folder = Path(tempfile.gettempdir()) / f"tomofolio-kernels-{user}"
    try:
        folder.mkdir(mode=0o700, exist_ok=True)
        facts = folder.lstat()
    except OSError:
        return Path(tempfile.mkdtemp(prefix="tomofolio-kernels-"))
    private = stat.S_ISDIR(facts.st_mode) and (not hasattr(os, "getuid") or facts.st_uid == user)
    if private and not facts.st_mode & 0o077:
        return folder
    return Path(tempfile.mkdtemp(prefix="tomofolio-kernels-"))

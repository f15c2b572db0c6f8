"""Where neither the package nor the home folder can be written, compiled kernels get a private folder."""

import os
import stat
from pathlib import Path

from tomofolio import _kernel_cache


def read_only(monkeypatch, tmp_path):
    monkeypatch.delenv("NUMBA_CACHE_DIR", raising=False)
    monkeypatch.setattr(_kernel_cache.os, "access", lambda path, mode: False)
    monkeypatch.setattr(_kernel_cache.tempfile, "tempdir", str(tmp_path))


def test_the_folder_is_private_and_the_same_each_time(monkeypatch, tmp_path):
    read_only(monkeypatch, tmp_path)
    _kernel_cache.choose_kernel_cache()
    first = os.environ.pop("NUMBA_CACHE_DIR")
    _kernel_cache.choose_kernel_cache()
    assert os.environ["NUMBA_CACHE_DIR"] == first
    assert stat.S_IMODE(Path(first).stat().st_mode) == 0o700


def test_a_folder_that_others_can_write_is_not_trusted(monkeypatch, tmp_path):
    read_only(monkeypatch, tmp_path)
    _kernel_cache.choose_kernel_cache()
    planted = os.environ.pop("NUMBA_CACHE_DIR")
    Path(planted).chmod(0o777)
    _kernel_cache.choose_kernel_cache()
    assert os.environ["NUMBA_CACHE_DIR"] != planted


def test_a_writable_home_is_left_to_numba(monkeypatch):
    monkeypatch.delenv("NUMBA_CACHE_DIR", raising=False)
    _kernel_cache.choose_kernel_cache()
    assert "NUMBA_CACHE_DIR" not in os.environ

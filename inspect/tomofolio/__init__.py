"""From a folder of CT slices to a report that can be read, checked and repeated."""

from importlib.metadata import PackageNotFoundError, version

from tomofolio._kernel_cache import choose_kernel_cache

try:
    __version__ = version("tomofolio")
except PackageNotFoundError:  # run straight from a checkout that was never installed
    __version__ = "0+checkout"

choose_kernel_cache()  # must stand before the first import of numba

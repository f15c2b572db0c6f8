"""From a folder of CT slices to a report that can be read, checked and repeated."""

from importlib.metadata import PackageNotFoundError, version

try:
    __version__ = version("tomofolio")
except PackageNotFoundError:  # run straight from a checkout that was never installed
    __version__ = "0+checkout"

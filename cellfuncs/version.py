"""The installed version, the one that pyproject.toml names."""

from importlib.metadata import PackageNotFoundError, version

try:
    __version__ = version("cellfuncs")
except PackageNotFoundError:  # run from a copy of the source that nobody installed
    __version__ = "0+unknown"

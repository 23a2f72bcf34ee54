"""The version that answers carry."""

from importlib.metadata import PackageNotFoundError, version

try:
    VERSION = version("stagesum")
except PackageNotFoundError:  # run from the source without being installed
    VERSION = "0"

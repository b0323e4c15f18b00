"""Bytes to a checked Cell: cell file, URDF, limits file, command log; every fault comes at once."""

from reach.formats.command_log import check_arrays as check_arrays
from reach.formats.readers import READERS as READERS
from reach.formats.toml_cell import load_cell as load_cell

__all__ = ["READERS", "check_arrays", "load_cell"]

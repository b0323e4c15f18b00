"""Bytes to a checked Cell: cell file, URDF, limits file, command log; every fault comes at once."""

from reach.formats.command_log import check_arrays as check_arrays
from reach.formats.keys import keys_text as keys_text
from reach.formats.log_time import MAX_PERIODS as MAX_PERIODS
from reach.formats.log_time import check_span as check_span
from reach.formats.readers import READERS as READERS
from reach.formats.toml_cell import load_cell as load_cell

__all__ = ["MAX_PERIODS", "READERS", "check_arrays", "check_span", "keys_text", "load_cell"]

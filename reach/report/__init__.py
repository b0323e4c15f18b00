"""The outputs of a finished run.

A writer turns a FollowResult into text or bytes and touches no file. Its module is loaded on first use, so
importing this package loads no drawing library.
"""

from reach.report.folder import check_targets, write_files, write_folder
from reach.report.writers import KINDS, WRITERS, Writer

__all__ = ["KINDS", "WRITERS", "Writer", "check_targets", "write_files", "write_folder"]

"""The outputs of a finished run.

A writer turns a command's result into text or bytes and touches no file. Here is what the commands share; what one
of them alone tells is in the package of its name. Its modules are loaded on first use, so importing this package
loads no drawing library.
"""

from reach.report.folder import check_targets, write_files, write_folder
from reach.report.writers import COMMANDS, KINDS, WRITERS, Writer

__all__ = ["COMMANDS", "KINDS", "WRITERS", "Writer", "check_targets", "write_files", "write_folder"]

"""From a command log to a finished motion and its evidence: reference, one step, the whole roll, one run of a cell."""

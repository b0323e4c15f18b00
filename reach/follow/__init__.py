"""From a command log to a finished motion: reference, one step, the whole roll, what fell short, what helps."""

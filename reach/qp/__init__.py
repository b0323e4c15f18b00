"""Small dense quadratic programs: the problem, its solution, and a check that trusts no solver's word."""

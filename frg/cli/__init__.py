"""The command line: the only place with strings for choices, printing and default tolerances."""

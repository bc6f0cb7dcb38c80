"""Elementary functions of our own: programs of integer operations, from which numpy functions and C are made."""

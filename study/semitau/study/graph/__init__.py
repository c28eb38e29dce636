"""A study as a graph of steps, whose outcomes are kept under keys of all that they depend on."""

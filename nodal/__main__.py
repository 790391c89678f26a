"""`python -m nodal` is the command `nodal`."""

from nodal.cli import main

main()

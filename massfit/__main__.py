"""`python -m massfit`."""

from massfit.cli.main import main

main()

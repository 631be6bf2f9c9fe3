"""`python -m lespost` is the same as the installed command."""

from lespost.cli import main

main()

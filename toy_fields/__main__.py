"""`python -m toy_fields`."""

from toy_fields.cli import main

main()

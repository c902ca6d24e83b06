"""`python -m budgetcheck`."""

from .cli import main

main()

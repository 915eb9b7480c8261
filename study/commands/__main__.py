"""`python -m study.commands` is the command."""

from study.commands import main

main()

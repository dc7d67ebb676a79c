"""`python -m carrylab` is the command line."""

from carrylab.cli import main

main()

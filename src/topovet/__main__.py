"""`python -m topovet`, the same as the command `topovet`."""

from topovet.cli.main import main

main()

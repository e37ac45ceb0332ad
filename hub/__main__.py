"""``python -m hub`` is the same as ``packfold``."""

from hub.cli import main

main()

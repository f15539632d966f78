"""``python -m tackbench.cli``: the same as the command ``tackbench``."""

from tackbench.cli.edge import main

main()

"""python -m monitor: the same as the command fieldsill."""

from monitor.cli import main

main()

"""Run the command as a module: `python -m texture_cli`."""

from texture_cli.main import main

main()

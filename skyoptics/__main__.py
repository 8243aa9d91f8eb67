"""``python -m skyoptics``."""

from skyoptics.cli.main import main

main()

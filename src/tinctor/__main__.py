"""`python -m tinctor`."""

from tinctor.cli.main import main

main()

"""`python -m sdebench`."""

from sdebench.cli import main

main()

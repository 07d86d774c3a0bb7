"""`python -m portfolio` is the same as `portfolio`."""

from portfolio.command import main

main()

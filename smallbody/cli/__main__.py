"""`python -m smallbody.cli` is `smallbody`."""

from smallbody.cli import main

main()

"""`python -m quarterturn`: the command line."""

from quarterturn.cli import main

raise SystemExit(main())

"""`python -m spanwright`: the command line."""

from spanwright.cli import main

raise SystemExit(main())

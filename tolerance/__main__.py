"""`python -m tolerance` is the command `tolerance`."""

from __future__ import annotations

from tolerance.command import main

main()

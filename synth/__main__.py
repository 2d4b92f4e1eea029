"""`python -m synth`: the command line."""

from __future__ import annotations

from synth.cli import main

if __name__ == "__main__":
    main()

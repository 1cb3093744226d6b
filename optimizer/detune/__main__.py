"""`python -m detune`."""

from detune.cli import main

raise SystemExit(main())

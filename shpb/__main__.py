"""``python -m shpb``."""

from shpb.cli.main import main

if __name__ == "__main__":
    raise SystemExit(main())

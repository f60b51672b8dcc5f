"""``python -m samesum``."""

from samesum.cli.main import main

if __name__ == "__main__":
    raise SystemExit(main())

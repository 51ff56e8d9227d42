"""Run the command line with ``python -m xmatch``."""

from xmatch.cli import main

if __name__ == "__main__":
    main()

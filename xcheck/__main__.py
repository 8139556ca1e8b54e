"""`python -m xcheck`."""

from xcheck.cli import main

if __name__ == "__main__":
    main()

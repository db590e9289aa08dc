"""`python -m layout`."""

from layout.cli import main

if __name__ == "__main__":
    main()

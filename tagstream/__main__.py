"""`python -m tagstream` is the command `tagstream`."""

from tagstream.cli import main

if __name__ == "__main__":
    main()

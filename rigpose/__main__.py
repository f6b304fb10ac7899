"""`python -m rigpose`: the same as the command `rigpose`."""

from rigpose.cli.main import main

if __name__ == "__main__":
    main()

"""`python -m fieldviz` is the same as the command `fieldviz`."""

from fieldviz.cli import main

if __name__ == "__main__":
    main()

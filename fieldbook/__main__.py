"""`python -m fieldbook` is the `fieldbook` command."""

from fieldbook.commands import main

if __name__ == "__main__":
    main()

"""Run the command line: ``python -m geoshape``."""

from geoshape.cli.main import main

if __name__ == "__main__":
    main()

"""`python -m biasband` is the command line too."""

from biasband.cli import main

if __name__ == "__main__":
    main()

"""`python -m lossagg`."""

from lossagg.commands import main

if __name__ == "__main__":
    main()

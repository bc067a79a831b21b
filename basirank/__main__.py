"""`python -m basirank` is the command `basirank`."""

from .cli import main

if __name__ == "__main__":
    main()

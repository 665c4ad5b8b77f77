"""``python -m rigbench``."""

from rigbench.cli import main

if __name__ == "__main__":
    main()

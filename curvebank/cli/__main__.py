"""``python -m curvebank.cli`` is the ``curvebank`` command."""

from . import main

if __name__ == "__main__":
    main()

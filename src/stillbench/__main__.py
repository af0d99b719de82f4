"""python -m stillbench."""

from stillbench.cli.main import main

if __name__ == "__main__":
    main()

"""`python -m simimg_cli` does what `simimg` does."""

from simimg_cli.main import main

if __name__ == "__main__":
    main()

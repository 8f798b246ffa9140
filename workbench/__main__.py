"""Run the command line as ``python -m workbench``."""

from workbench.cli.main import run

if __name__ == "__main__":
    run()

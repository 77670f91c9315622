"""``python -m shares`` is the same as ``shares``."""

from shares.cli.main import run

if __name__ == "__main__":
    run()

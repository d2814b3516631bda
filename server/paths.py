"""Where templates and static files lie: inside the package when installed, beside it in a checkout."""

from pathlib import Path

_HERE = Path(__file__).resolve().parent


def asset_dir(name: str) -> Path:
    """The folder of that name. Raises RuntimeError where the installation lacks it."""
    for base in (_HERE, _HERE.parent):
        if (base / name).is_dir():
            return base / name
    raise RuntimeError(f"{name}/ is missing: reinstall the package")

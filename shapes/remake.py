"""Makes the bodies of recipe.toml again, or with --check says whether the files beside it are still what it makes."""

from __future__ import annotations

import argparse
import sys
import tomllib
from pathlib import Path

from smallbody.shape import make_shape, require_usable, shape_bytes, write_shape

HERE = Path(__file__).parent
MILLIMETRE = 6  # decimals of a kilometre


def main() -> int:
    """Exit code 1 if a file differs under --check."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--check", action="store_true", help="compare with the files, write nothing")
    check = parser.parse_args().check
    recipe = tomllib.loads((HERE / "recipe.toml").read_text(encoding="utf-8"))
    differ = 0
    for name, numbers in recipe.items():
        path = HERE / numbers.pop("file")
        shape = make_shape(numbers.pop("kind"), numbers.pop("facets"), numbers.pop("seed", 0), **numbers)
        require_usable(shape)
        if not check:
            write_shape(shape, path, "km", MILLIMETRE)
            print(f"{name}: {len(shape.facets)} facets in {path.name}")
        elif not path.exists() or path.read_bytes() != shape_bytes(shape, path.suffix, "km", MILLIMETRE):
            print(f"{name}: {path.name} is not what the recipe makes", file=sys.stderr)
            differ += 1
    return 1 if differ else 0


if __name__ == "__main__":
    sys.exit(main())

"""Render the fragments: ``python -m sample_images.render [NAME ...] [--records-only] [--into FOLDER]``."""

from __future__ import annotations

import argparse
import shutil
import time
from pathlib import Path

from sample_images.render.fragments import LEFT_LOST, SITTINGS
from sample_images.render.studio import make

HERE = Path(__file__).resolve().parent.parent
BUNDLED = HERE.parent / "layout" / "demo"


def main() -> None:
    """Render the fragments that are named, or all of them."""
    stems = [sitting.spec.stem for sitting in SITTINGS]
    parser = argparse.ArgumentParser(prog="python -m sample_images.render", description=__doc__)
    parser.add_argument("names", nargs="*", choices=[[], *stems], help="which fragments; all without a name")
    parser.add_argument("--records-only", action="store_true", help="keep the photographs as they are")
    parser.add_argument("--into", type=Path, default=HERE, help="folder to write to")
    options = parser.parse_args()
    for sitting in SITTINGS:
        if options.names and sitting.spec.stem not in options.names:
            continue
        began = time.perf_counter()
        make(sitting, options.into, picture=not options.records_only)
        print(f"{sitting.spec.stem}: {time.perf_counter() - began:.0f} s")
        if sitting is LEFT_LOST and options.into == HERE:
            for ending in (".jpg", ".fragment.json"):
                shutil.copy(HERE / f"{sitting.spec.stem}{ending}", BUNDLED)


if __name__ == "__main__":
    main()

"""Draw the sample sheets again: scans, recipes and truth, the same every time.

    python samples/draw.py                      all of them, beside this file
    python samples/draw.py lark-wm-150 --out DIR

The scans are invented: see README.md in this folder.
"""

import argparse
import hashlib
import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
if str(HERE) not in sys.path:
    sys.path.insert(0, str(HERE))

from drawing import record  # noqa: E402
from drawing.catalogue import SHEETS  # noqa: E402


def write(sheet, folder):
    """Write scan, recipe and truth of one sheet; returns the scan's path and SHA-256."""
    data = sheet.paint(sheet)
    sha256 = hashlib.sha256(data).hexdigest()
    truth = sheet.truth()
    (folder / sheet.file).write_bytes(data)
    (folder / f"{sheet.name}.truth.json").write_text(record.dump(truth), encoding="utf-8")
    (folder / f"{sheet.name}.recipe.json").write_text(record.dump(sheet.recipe(truth, sha256)), encoding="utf-8")
    return folder / sheet.file, sha256


def main(argv=None):
    """Command line."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("names", nargs="*", help="sheets to draw; all when left out")
    parser.add_argument("--out", type=Path, default=HERE)
    options = parser.parse_args(argv)
    unknown = sorted(set(options.names) - set(SHEETS))
    if unknown:
        parser.error(f"no sheet named {', '.join(unknown)}; there are {', '.join(SHEETS)}")
    options.out.mkdir(parents=True, exist_ok=True)
    for name in options.names or SHEETS:
        path, sha256 = write(SHEETS[name](), options.out)
        print(f"{path.name:24s} {path.stat().st_size / 1000:7.0f} kB  {sha256}")


if __name__ == "__main__":
    main()

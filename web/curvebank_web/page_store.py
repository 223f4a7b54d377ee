"""Decoded pages on disk: a pyramid of memory-mapped arrays from which tiles are cut, and what is known of each page.

Level 0 is the page, each further level is the 2 x 2 mean of the one below (edges repeated to an even size, so that one pixel
of level k covers exactly 2**k x 2**k pixels of the page). A page folder appears by one rename, so it is complete or absent.
"""

import json
import os
import shutil
import tempfile
import threading
from collections.abc import Callable
from dataclasses import asdict
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from curvebank.records import PageInfo

TILE = 256
FIRST_DPI = 300
"""Resolution at which a new PDF is first drawn [1/inch]."""
FORM = "1"
"""Part of the folder name: changes when the pyramid would."""
Pixels = npt.NDArray[np.uint8]


class PageKey(NamedTuple):
    """What names a decoded page: pixels depend on nothing else."""

    sha256: str
    page: int
    dpi: float
    turn: int

    @property
    def name(self) -> str:
        """File-system name of the page."""
        return f"{self.sha256}-{self.page}-{self.dpi:g}-{self.turn}"


def max_zoom(width: int, height: int) -> int:
    """The zoom at which the page has its full size; at zoom 0 it fits one tile."""
    zoom = 0
    while max(width, height) > TILE << zoom:
        zoom += 1
    return zoom


def halve(pixels: Pixels) -> Pixels:
    """The 2 x 2 mean, rounded; an odd edge is repeated."""
    height, width = pixels.shape[:2]
    if height % 2 or width % 2:
        pad = ((0, height % 2), (0, width % 2)) + ((0, 0),) * (pixels.ndim - 2)
        pixels = np.pad(pixels, pad, mode="edge")
    total = pixels[0::2, 0::2].astype(np.uint16)
    total += pixels[1::2, 0::2]
    total += pixels[0::2, 1::2]
    total += pixels[1::2, 1::2]
    total += 2
    return (total >> 2).astype(np.uint8)


def encode_png(pixels: Pixels) -> bytes:
    """A tile as PNG; fast compression, the wire is this machine."""
    import cv2

    bgr = pixels if pixels.ndim == 2 else pixels[..., ::-1]
    ok, buffer = cv2.imencode(".png", np.ascontiguousarray(bgr), [cv2.IMWRITE_PNG_COMPRESSION, 2])
    if not ok:
        raise RuntimeError("a tile could not be encoded")
    return buffer.tobytes()


class PageStore:
    """Pages and tiles under ``folder``. ``fetch(sha256)`` gives the bytes of a sheet's file, or raises its own 404."""

    def __init__(self, folder: Path, fetch: Callable[[str], bytes]) -> None:
        self.folder = folder
        self.fetch = fetch
        self._decoding = threading.Lock()  # one page at a time: bounds memory
        self._open: dict[tuple[PageKey, int], Pixels] = {}

    def info(self, key: PageKey) -> PageInfo:
        """Size, resolution and kind of a page; decodes it the first time.

        Raises
        ------
        curvebank.errors.SheetError
            The file cannot be read, or has no such page.
        """
        return PageInfo(**json.loads((self._page_folder(key) / "info.json").read_text()))

    def first_page(self, data: bytes) -> PageInfo:
        """Decode the first page of a new file and keep it, so that its tiles are ready.

        Raises
        ------
        curvebank.errors.SheetError
            The file cannot be read.
        """
        from curvebank import sheet

        with self._decoding:
            loaded = sheet.load(data, page=1, dpi=FIRST_DPI, turn=0)
            folder = self._place(PageKey(loaded.info.sha256, 1, FIRST_DPI, 0))
            if not folder.exists():
                self._keep(loaded, folder)
        return loaded.info

    def describe(self, key: PageKey) -> dict[str, Any]:
        """A page as the API shows it."""
        return describe(self.info(key), key.dpi)

    def tile(self, key: PageKey, zoom: int, x: int, y: int) -> bytes | None:
        """One tile as PNG, or None where the page has none. Tiles at the right and lower edge are smaller."""
        info = self.info(key)
        top = max_zoom(info.width, info.height)
        if not 0 <= zoom <= top:
            return None
        level = self.level(key, top - zoom)
        if x < 0 or y < 0 or x * TILE >= level.shape[1] or y * TILE >= level.shape[0]:
            return None
        path = self._page_folder(key) / "tiles" / str(zoom) / f"{x}-{y}.png"
        try:
            return path.read_bytes()
        except FileNotFoundError:
            data = encode_png(level[y * TILE : (y + 1) * TILE, x * TILE : (x + 1) * TILE])
            write_whole(path, data)
            return data

    def level(self, key: PageKey, level: int) -> Pixels:
        """A level of the pyramid, memory-mapped; 0 is the full page."""
        try:
            return self._open[key, level]
        except KeyError:
            pixels = np.load(self._page_folder(key) / f"{level}.npy", mmap_mode="r")
            if len(self._open) > 64:
                self._open.clear()
            self._open[key, level] = pixels
            return pixels

    def _place(self, key: PageKey) -> Path:
        return self.folder / "pages" / f"{key.name}-{FORM}"

    def _page_folder(self, key: PageKey) -> Path:
        folder = self._place(key)
        if not folder.exists():
            with self._decoding:
                if not folder.exists():
                    self._decode(key, folder)
        return folder

    def _decode(self, key: PageKey, folder: Path) -> None:
        from curvebank import sheet

        self._keep(sheet.load(self.fetch(key.sha256), page=key.page, dpi=key.dpi, turn=key.turn), folder)

    def _keep(self, loaded: Any, folder: Path) -> None:
        folder.parent.mkdir(parents=True, exist_ok=True)
        scratch = Path(tempfile.mkdtemp(prefix=".page-", dir=folder.parent))
        try:
            pixels, level = loaded.pixels, 0
            while True:
                np.save(scratch / f"{level}.npy", pixels)
                if max(pixels.shape[:2]) <= TILE:
                    break
                pixels, level = halve(pixels), level + 1
            (scratch / "info.json").write_text(json.dumps(asdict(loaded.info)))
            publish(scratch, folder)
        finally:
            shutil.rmtree(scratch, ignore_errors=True)


def describe(info: PageInfo, dpi: float) -> dict[str, Any]:
    """PAGE of the API."""
    return {**asdict(info), **_tiling(info.width, info.height, dpi)}


def described(sheet: dict[str, Any]) -> dict[str, Any]:
    """A sheet of a stored revision as PAGE, with what the revision knows of it; a source without a scan stays as it is."""
    if sheet["sha256"] is None:
        return sheet
    drawn = sheet["dpi_x"] if sheet["media"] == "application/pdf" else None
    return {**sheet, **_tiling(sheet["width"], sheet["height"], drawn or FIRST_DPI)}


def _tiling(width: int, height: int, dpi: float) -> dict[str, Any]:
    return {"dpi": dpi, "tile_size": TILE, "max_zoom": max_zoom(width, height)}


def publish(scratch: Path, folder: Path) -> None:
    """Move a finished folder to its place; another process may have been first, which is as good."""
    try:
        os.replace(scratch, folder)
    except OSError:
        if not folder.exists():
            raise


def write_whole(path: Path, data: bytes) -> None:
    """Write a file so that readers see all of it or nothing; a full disk costs the cache, not the answer."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        with tempfile.NamedTemporaryFile(dir=path.parent, prefix=".part-", delete=False) as part:
            part.write(data)
        os.replace(part.name, path)
    except OSError:
        pass


def prune(folder: Path, limit_bytes: int) -> None:
    """Drop the longest unused entries of a cache folder until it is below the limit. Nothing in it is the only copy."""
    entries = []
    for entry in folder.iterdir() if folder.is_dir() else ():
        files = [f.stat() for f in entry.rglob("*") if f.is_file()]
        if files:
            entries.append((max(f.st_mtime for f in files), sum(f.st_size for f in files), entry))
    total = sum(size for _, size, _ in entries)
    for _, size, entry in sorted(entries):
        if total <= limit_bytes:
            break
        shutil.rmtree(entry, ignore_errors=True)
        total -= size

"""A store that machines share through an fsspec URL (the extra `tangentry[cluster]`), with local copies.

Arrays and values never change, so a local copy is as good as the shared one. Results may grow elsewhere, so they are
looked up there each time.
"""

from __future__ import annotations

import contextlib
import os
import secrets
from pathlib import Path
from typing import Any

from tangentry.pipeline.errors import TangentryError
from tangentry.pipeline.store import Store, StoreError
from tangentry.pipeline.writing import write_whole


class RemoteStore(Store):
    """The store at a URL, kept locally in a folder."""

    def __init__(self, folder: str | os.PathLike[str], url: str) -> None:
        super().__init__(folder)
        self.url = url
        try:
            import fsspec
        except ImportError:
            raise TangentryError("--store URL needs the package fsspec: pip install 'tangentry[cluster]'") from None
        try:
            files, root = fsspec.core.url_to_fs(url)
        except (ImportError, ValueError, OSError) as error:
            raise StoreError(f"--store {url}: can't be opened: {error}") from None
        self._files: Any = files
        self._root = root.rstrip("/")

    def _bring(self, path: Path) -> None:
        """Copy an object here, if it is there and not here yet."""
        lasting = path.suffix == ".npy" or path.parent.parent.name == "values"
        if lasting and path.exists():
            return
        try:
            content = self._files.cat_file(self._there(path))
        except FileNotFoundError:
            return
        except OSError as error:
            raise StoreError(f"{self.url}: can't be read: {error}") from error
        write_whole(path, lambda file: file.write(content))

    def _send(self, path: Path) -> None:
        """Copy an object there: under a unique name first, then renamed."""
        there = self._there(path)
        unfinished = f"{there}.{secrets.token_hex(4)}.unfinished"
        try:
            if path.suffix == ".npy" and self._files.exists(there):
                return
            self._files.makedirs(os.path.dirname(there), exist_ok=True)
            self._files.pipe_file(unfinished, path.read_bytes())
            self._files.mv(unfinished, there)
        except OSError as error:
            raise StoreError(f"{self.url}: can't be written: {error}") from error

    def _set_aside(self, path: Path) -> None:
        """There, too: what is made again is sent again."""
        super()._set_aside(path)
        if self.read_only:
            return
        aside = f"{self._root}/aside"
        with contextlib.suppress(OSError):
            self._files.makedirs(aside, exist_ok=True)
            self._files.mv(self._there(path), f"{aside}/{path.name}.{secrets.token_hex(4)}")

    def _there(self, path: Path) -> str:
        return f"{self._root}/{path.relative_to(self.folder).as_posix()}"


def open_store(folder: str | os.PathLike[str], url: str = "") -> Store:
    """The store in a folder, or the one at a URL with its local copy in the folder."""
    return RemoteStore(folder, url) if url else Store(folder)

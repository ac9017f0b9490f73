"""The sheet on disk: read whole, written whole or not at all, and never over somebody else's change unasked."""

from __future__ import annotations

import os
from dataclasses import dataclass

from workbench.errors import UllageError
from workbench.library.writing import write_whole
from workbench.sheet.reader import decode_sheet


class ChangedOnDisk(UllageError):
    """The file is not the one that was read: somebody else has written it, or removed it."""


class NotSaved(UllageError):
    """The file could not be written; the text is still in the workbench."""


@dataclass(frozen=True, slots=True)
class Disk:
    """A file as it was last read or written here."""

    path: str
    data: bytes
    text: str

    @classmethod
    def read(cls, path: str) -> Disk:
        """Raises OSError where it cannot be read. Bytes that are no UTF-8 are shown as replacement characters."""
        with open(path, "rb") as file:
            data = file.read()
        text, _ = decode_sheet(data, path)
        return cls(path, data, data.decode("utf-8", "replace") if text is None else text)

    @property
    def is_changed(self) -> bool:
        """Whether the file now holds something else."""
        try:
            with open(self.path, "rb") as file:
                return file.read() != self.data
        except OSError:
            return True

    def written(self, text: str, *, over: bool = False) -> Disk:
        """Writes the text by way of a second file, so that the sheet is always the old or the new one, whole.

        Raises ChangedOnDisk, unless `over`; NotSaved where the folder or the disk does not let it.
        """
        if not over and self.is_changed:
            raise ChangedOnDisk(f"{self.path} was changed by somebody else meanwhile")
        data = text.encode("utf-8")
        if os.path.exists(self.path) and not os.access(self.path, os.W_OK):
            raise NotSaved(f"{self.path} may not be written; the text is still here")
        try:
            write_whole(self.path, [data])
        except OSError as e:
            raise NotSaved(f"{self.path} cannot be written: {e.strerror}; the text is still here") from None
        return Disk(self.path, data, text)

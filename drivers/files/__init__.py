"""Waveforms from files: text by its shape, WAV, and a folder into which captures are saved."""

from drivers.files.capture import SUFFIXES
from drivers.files.folder import FolderSource, open_folder
from drivers.files.single import FileSource, open_file

__all__ = ["SUFFIXES", "FileSource", "FolderSource", "open_file", "open_folder"]

"""The text of an input file, or the reason why there is none."""

from __future__ import annotations

import codecs
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path

from skinmesh.definition.blade import Source
from skinmesh.definition.problems import Findings

LARGEST = 8_000_000  # bytes; the largest tables and profiles of measured blades stay far below


@dataclass(frozen=True)
class InputText:
    """An input file that was read.

    Attributes
    ----------
    file : str
        As the user wrote it.
    text : str
        With plain line feeds and without a byte-order mark.
    source : Source
    """

    file: str
    text: str
    source: Source

    @property
    def lines(self) -> list[str]:
        """The lines, split at line feeds only."""
        return self.text.split("\n")


def read_text(
    path: Path, file: str, *, findings: Findings, kind: str, source_name: str | None = None, is_strict: bool = True
) -> InputText | None:
    """Read a text file.

    Parameters
    ----------
    path : Path
    file : str
        Its name as the user wrote it, for messages.
    findings : Findings
        Takes the reason why it cannot be read.
    kind : str
        What the file is, in the user's words: 'station table'.
    source_name : str, optional
        Name in the list of sources, where it is not ``file``.
    is_strict : bool
        Whether a byte that is not UTF-8 is a mistake. Old profile files carry such bytes in their titles.

    Returns
    -------
    InputText or None
    """
    data = _read_bytes(path, file, findings, kind)
    if data is None:
        return None
    source = Source(source_name or file, sha256(data).hexdigest())
    if data.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        text = data.decode("utf-16", errors="replace")
    elif b"\0" in data:
        findings.add(file, f"is a binary file; the {kind} must be plain text")
        return None
    else:
        try:
            text = data.decode("utf-8-sig", errors="strict" if is_strict else "replace")
        except UnicodeDecodeError as error:
            line = data.count(b"\n", 0, error.start) + 1
            findings.add(file, f"the {kind} is not in UTF-8 here; save it again with the encoding UTF-8", line=line)
            return None
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    if not text.strip():
        findings.add(file, f"is empty; a {kind} was expected")
        return None
    return InputText(file, text, source)


def _read_bytes(path: Path, file: str, findings: Findings, kind: str) -> bytes | None:
    try:
        if path.is_dir():
            findings.add(file, f"is a folder; name the {kind} itself")
            return None
        if path.is_symlink() and not path.exists():
            findings.add(file, f"is a link that leads nowhere (to {path.readlink()}); the {kind} cannot be read")
            return None
        if not path.exists():
            findings.add(file, f"no such file: the {kind} is not at {path.absolute()}")
            return None
        if not path.is_file():
            findings.add(file, f"is a device or a pipe, not a file; name the {kind} itself")
            return None
        if path.stat().st_size > LARGEST:
            findings.add(file, f"is larger than {LARGEST // 1_000_000} MB; that is no {kind}")
            return None
        return path.read_bytes()
    except PermissionError:
        findings.add(file, f"may not be read; give yourself the permission to read the {kind}")
    except OSError as error:
        findings.add(file, f"cannot be read: {error.strerror or error}")
    except ValueError:
        findings.add(file, "cannot be the name of a file: it holds a character that no file name may have")
    return None

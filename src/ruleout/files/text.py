"""Text files as a user may really hand them over."""

from __future__ import annotations

from pathlib import Path

from ruleout.errors import InputError

_WIDE = {b"\xff\xfe": "UTF-16", b"\xfe\xff": "UTF-16"}


def read_text(path: Path, *, limit: int) -> str:
    """Return the text of a UTF-8 file, its line ends made plain and no byte order mark kept.

    Parameters
    ----------
    path : Path
    limit : int
        Largest size in bytes.

    Raises
    ------
    InputError
        Where the file is missing, no file, unreadable, empty, larger than ``limit``, binary or in
        another encoding.
    """
    try:
        if path.is_dir():
            raise InputError("this is a folder; a file is expected here", where=str(path))
        size = path.stat().st_size
        if not path.is_file():
            raise InputError("this is no ordinary file", where=str(path))
        if size > limit:
            raise InputError(
                f"the file has {size / 1e6:.1f} MB; at most {limit / 1e6:g} MB are read. "
                "Is it the right file?",
                where=str(path),
            )
        raw = path.read_bytes()
    except FileNotFoundError as error:
        raise InputError("there is no such file", where=str(path)) from error
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(f"the file cannot be read ({reason})", where=str(path)) from error
    text = _decode(raw, path)
    if not text.strip():
        raise InputError("the file is empty", where=str(path))
    return text


def _decode(raw: bytes, path: Path) -> str:
    if encoding := _WIDE.get(raw[:2]):
        raise InputError(f"the file is in {encoding}; save it as UTF-8", where=str(path))
    if b"\0" in raw:
        raise InputError("this is a binary file; plain UTF-8 text is expected", where=str(path))
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise InputError(
            "this line is not in UTF-8; save the file as UTF-8", where=f"{path}:{line}"
        ) from error
    return text.replace("\r\n", "\n").replace("\r", "\n")

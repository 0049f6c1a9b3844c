"""Text files that users write, read whole; what cannot be read is a fault, never a traceback."""

from __future__ import annotations

from fogline.faults import Fault, InputError


def read_text(path: str) -> str:
    """Return the text of a user's file with Unix line ends.

    Parameters
    ----------
    path : str
        The file.

    Returns
    -------
    str

    Raises
    ------
    InputError
        Where there is no such file, or it is no UTF-8 text.
    """
    try:
        with open(path, "rb") as file:
            raw = file.read()
    except FileNotFoundError:
        raise InputError([Fault(path, 1, "no such file")]) from None
    except IsADirectoryError:
        raise InputError([Fault(path, 1, "is a directory, not a file")]) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or error
        raise InputError([Fault(path, 1, f"cannot be read: {reason}")]) from None
    return _decode(raw, path)


def _decode(raw: bytes, path: str) -> str:
    if b"\0" in raw:
        line = raw[: raw.index(b"\0")].count(b"\n") + 1
        raise InputError([Fault(path, line, "is a binary file, must be UTF-8 text")])
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        found = f"byte 0x{raw[error.start]:02x}"
        raise InputError([Fault(path, line, f"is not UTF-8 text: found {found}")]) from None
    return text.replace("\r\n", "\n").replace("\r", "\n")

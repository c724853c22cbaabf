"""Keyed pseudonyms: HMAC-SHA256 under the site key, cut to a form that people can read out to each other."""

from __future__ import annotations

import contextlib
import hashlib
import hmac
import os
import secrets
import stat
from pathlib import Path
from typing import Literal, TypeAlias

from safecheck.errors import UsageError

__all__ = ["KEY_BYTES", "Kind", "Pseudonyms", "default_key_path", "load_or_make_key", "short_form"]

KEY_BYTES = 32
Kind: TypeAlias = Literal["patient", "study", "series", "instance", "input", "kernel", "frame"]
"""`frame` is a frame of reference."""

_LETTERS: dict[str, str] = {
    "patient": "P",
    "study": "S",
    "series": "R",
    "instance": "I",
    "input": "F",
    "kernel": "K",
    "frame": "G",
}
# Crockford's base 32: no I, L, O or U, so that a form read aloud or typed again is not mistaken.
_ALPHABET = "0123456789ABCDEFGHJKMNPQRSTVWXYZ"
_GROUP = 5


def short_form(digest: bytes) -> str:
    """First 50 bits of a digest as two groups of five base 32 characters."""
    number = int.from_bytes(digest[:8], "big") >> 14
    text = "".join(_ALPHABET[(number >> shift) & 31] for shift in range(45, -1, -5))
    return f"{text[:_GROUP]}-{text[_GROUP:]}"


class Pseudonyms:
    """Names under one site key; the same value of the same kind always takes the same name.

    Parameters
    ----------
    key
        The site key, at least 16 bytes.

    Raises
    ------
    ValueError
        If the key is shorter.
    """

    def __init__(self, key: bytes) -> None:
        if len(key) < 16:
            raise ValueError("a site key has at least 16 bytes")
        self._key = key
        self._seen: dict[str, bytes] = {}

    @property
    def key_id(self) -> str:
        """Short hash of the key, by which a record says under which key its names were made."""
        return short_form(hashlib.sha256(b"safecheck site key id\0" + self._key).digest())

    def name(self, kind: Kind, value: str) -> str:
        """Name of a value, e.g. ``P-7K3QX-04MZT`` for a patient.

        Parameters
        ----------
        kind
            Values of different kinds never share a name, even if equal.
        value
            Raw identifier or content hash; not kept.

        Raises
        ------
        UsageError
            If two values of this run would share a name (about 1 in 10**9 for 1,000 values): no figure may be
            booked under a wrong name, so the run stops and another key is asked for.
        """
        message = f"{kind}\0{value}".encode("utf-8", "surrogatepass")
        digest = hmac.digest(self._key, message, "sha256")
        short = f"{_LETTERS[kind]}-{short_form(digest)}"
        if self._seen.setdefault(short, digest) != digest:
            raise UsageError(f"two of kind '{kind}' share a pseudonym under this site key; name another key")
        return short


def default_key_path() -> Path:
    """Where the site key lies: the user's configuration folder (XDG; APPDATA on Windows)."""
    roots = (os.environ.get("XDG_CONFIG_HOME"), os.environ.get("APPDATA") if os.name == "nt" else None)
    root = next((Path(each) for each in roots if each), Path.home() / ".config")
    return root / "safecheck" / "site.key"


def load_or_make_key(path: Path | None) -> bytes:
    """Read the site key, or make one on first use.

    Parameters
    ----------
    path
        Key file; None for the user's own. Where it does not exist it is made, for its owner's eyes only.

    Returns
    -------
    bytes
        32 bytes.

    Raises
    ------
    UsageError
        If the file can be read by others, is no key, or can neither be read nor made.
    """
    place = path or default_key_path()
    try:
        if not place.exists():
            _make_key(place)
        return _read_key(place)
    except OSError as error:
        raise UsageError(f"the site key cannot be read or made ({type(error).__name__})") from None


def _make_key(place: Path) -> None:
    """Write a new key; a process that came first wins."""
    place.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
    content = secrets.token_hex(KEY_BYTES) + "\n"
    aside = place.with_name(f"{place.name}.{secrets.token_hex(8)}")
    _write_new(aside, content)
    try:
        # Linking is refused where a file already is, so two first runs at once still share one key, and a whole one.
        os.link(aside, place)
    except FileExistsError:
        return
    except OSError:
        # FAT and many network shares have no links.
        with contextlib.suppress(FileExistsError):
            _write_new(place, content)
    finally:
        aside.unlink()


def _write_new(place: Path, content: str) -> None:
    """Write a file that is not there yet, for its owner alone where the system knows owners."""
    with os.fdopen(os.open(place, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600), "w") as stream:
        stream.write(content)
        stream.flush()
        os.fsync(stream.fileno())


def _read_key(place: Path) -> bytes:
    """Read and check an existing key file."""
    with place.open("rb") as stream:
        mode = os.fstat(stream.fileno()).st_mode
        content = stream.read(4096)
    if os.name == "posix" and mode & (stat.S_IRWXG | stat.S_IRWXO):
        raise UsageError("the site key file can be read by others: expected a file that only its owner can read (0600)")
    try:
        key = bytes.fromhex(content.decode("ascii").strip())
    except ValueError:
        key = b""
    if len(key) != KEY_BYTES:
        raise UsageError(f"the site key file is not a key: expected {2 * KEY_BYTES} hexadecimal digits")
    return key

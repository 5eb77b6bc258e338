"""Packed bodies are unpacked within bounds, and damage is noticed."""

import gzip
import hashlib
from pathlib import Path

import pytest
import zstandard

from service.network.files.unpack import Unpacked, unpack

BODY = b'{"format": 1}' * 1000
MEBIBYTE = 1 << 20


def unpacked(
    tmp_path: Path, packed: bytes, encoding: str | None, *, bytes_max: int = MEBIBYTE
) -> tuple[Unpacked, bytes]:
    """Unpack some bytes; return what became of them and what was written."""
    (tmp_path / "spool").write_bytes(packed)
    result = unpack(
        tmp_path / "spool", tmp_path / "out", content_encoding=encoding, bytes_max=bytes_max
    )
    return result, (tmp_path / "out").read_bytes() if (tmp_path / "out").exists() else b""


def zstd(data: bytes) -> bytes:
    """Pack with zstd."""
    return zstandard.ZstdCompressor(level=3).compress(data)


@pytest.mark.parametrize(
    ("encoding", "packed"),
    [
        (None, BODY),
        ("identity", BODY),
        ("gzip", gzip.compress(BODY)),
        (" GZIP ", gzip.compress(BODY)),
        ("x-gzip", gzip.compress(BODY)),
        ("zstd", zstd(BODY)),
        ("gzip", gzip.compress(BODY[:5000]) + gzip.compress(BODY[5000:])),
        ("zstd", zstd(BODY[:5000]) + zstd(BODY[5000:])),
    ],
)
def test_a_body_is_the_same_however_it_was_packed(
    tmp_path: Path, encoding: str | None, packed: bytes
) -> None:
    """The request digest is that of the unpacked bytes; several members make one body."""
    result, out = unpacked(tmp_path, packed, encoding)

    assert result.status == "accepted"
    assert out == BODY
    assert result.digest == f"sha-256:{hashlib.sha256(BODY).hexdigest()}"
    assert result.size_bytes == len(BODY)


@pytest.mark.parametrize(
    ("encoding", "packed"),
    [
        ("gzip", b""),
        ("zstd", b""),
        ("gzip", BODY),
        ("zstd", BODY),
        ("gzip", gzip.compress(BODY)[:-1]),
        ("zstd", zstd(BODY)[:-1]),
        ("gzip", gzip.compress(BODY) + b"x"),
        ("zstd", zstd(BODY) + b"x"),
        ("gzip", gzip.compress(BODY)[:-5] + b"\0\0\0\0\0"),
    ],
)
def test_damage_is_noticed(tmp_path: Path, encoding: str, packed: bytes) -> None:
    """A network that was cut on the way must not be planned in part."""
    result, _ = unpacked(tmp_path, packed, encoding)

    assert result.status == "unreadable"
    assert result.fault is not None
    assert result.fault.code == "broken_encoding"


@pytest.mark.parametrize("encoding", ["br", "gzip, gzip", "deflate", "*"])
def test_other_encodings_are_refused_by_name(tmp_path: Path, encoding: str) -> None:
    """RFC 9110, section 15.5.16: a coding that is not supported is answered, not guessed at."""
    result, _ = unpacked(tmp_path, BODY, encoding)

    assert result.status == "unsupported"
    assert result.fault is not None
    assert result.fault.value == encoding


@pytest.mark.parametrize("encoding", ["gzip", "zstd", "identity"])
def test_a_body_that_grows_beyond_the_bound_is_stopped(tmp_path: Path, encoding: str) -> None:
    """256 MiB of zeros are 8 KiB of zstd; what is written stays near the bound."""
    blown_up = bytes(64 * MEBIBYTE)
    packed = {"gzip": gzip.compress(blown_up), "zstd": zstd(blown_up), "identity": blown_up}

    result, out = unpacked(tmp_path, packed[encoding], encoding, bytes_max=MEBIBYTE)

    assert result.status == "too_large"
    assert len(out) <= MEBIBYTE


def test_the_bound_itself_is_allowed(tmp_path: Path) -> None:
    """A limit is the most that is accepted."""
    result, _ = unpacked(tmp_path, zstd(BODY), "zstd", bytes_max=len(BODY))

    assert result.status == "accepted"


def test_a_frame_that_wants_too_much_memory_is_refused(tmp_path: Path) -> None:
    """A window of 2 GiB would be taken from the service, not from the client."""
    window_log_31 = bytes.fromhex("28b52ffd") + bytes([0x00, (31 - 10) << 3]) + b"\x01\x00\x00"

    result, _ = unpacked(tmp_path, window_log_31, "zstd")

    assert result.status == "unreadable"

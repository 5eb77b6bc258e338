"""The body as received, unpacked into a file: gzip and zstd, streamed, never beyond a bound."""

import hashlib
import zlib
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, Literal

import zstandard

from service.network.faults import Fault

PIECE_BYTES = 1 << 20
# A zstd block of 4 bytes can stand for 128 KiB, so one call on so little gives 32 MiB at most; the
# library offers no bound of its own for what one call may return.
ZSTD_PIECE_BYTES = 1 << 10
# What the strongest usual level of the format needs; more memory than that is not lent to a client.
ZSTD_WINDOW_BYTES_MAX = 1 << 27
GZIP_WINDOW_BITS = 31


@dataclass(frozen=True, slots=True, kw_only=True)
class Unpacked:
    """What became of a body: its digest and size, or the fault that stopped the unpacking."""

    status: Literal["accepted", "unreadable", "too_large", "unsupported"]
    digest: str
    size_bytes: int
    fault: Fault | None


class BrokenPackingError(ValueError):
    """The packed bytes are damaged or end too early."""


def unpack(
    spool: Path, received: Path, *, content_encoding: str | None, bytes_max: int
) -> Unpacked:
    """Write the unpacked bytes of ``spool`` to ``received`` and take their SHA-256 on the way.

    ``content_encoding`` is the HTTP header's value (RFC 9110, 8.4): gzip, zstd, or none.
    """
    encoding = (content_encoding or "identity").strip().lower()
    if encoding not in _UNPACKERS:
        detail = "This content encoding is not understood. Send gzip, zstd, or the plain bytes."
        fault = Fault(pointer="", code="unsupported_encoding", detail=detail, value=encoding[:200])
        return Unpacked(status="unsupported", digest="", size_bytes=0, fault=fault)
    digest = hashlib.sha256()
    size = 0
    with spool.open("rb") as source, received.open("wb") as target:
        try:
            for piece in unpacked_pieces(source, encoding):
                size += len(piece)
                if size > bytes_max:
                    detail = f"The body has more than {bytes_max} bytes when unpacked."
                    fault = Fault(pointer="", code="body_too_large", detail=detail)
                    return Unpacked(status="too_large", digest="", size_bytes=size, fault=fault)
                digest.update(piece)
                target.write(piece)
        except BrokenPackingError:
            detail = f"The body is not whole {encoding}: it is damaged or ends too early."
            fault = Fault(pointer="", code="broken_encoding", detail=detail)
            return Unpacked(status="unreadable", digest="", size_bytes=size, fault=fault)
    return Unpacked(
        status="accepted", digest=f"sha-256:{digest.hexdigest()}", size_bytes=size, fault=None
    )


def unpacked_pieces(source: BinaryIO, encoding: str) -> Iterator[bytes]:
    """Yield what ``source`` holds, in pieces of bounded size; ``encoding`` as in ``unpack``.

    Raises ``BrokenPackingError`` where the packing is damaged.
    """
    return _UNPACKERS[encoding](source)


def _plain(source: BinaryIO) -> Iterator[bytes]:
    """Yield a body that is not packed."""
    while piece := source.read(PIECE_BYTES):
        yield piece


def _gunzipped(source: BinaryIO) -> Iterator[bytes]:
    """Yield the contents of a gzip file of one or more members (RFC 1952)."""
    unpacker = zlib.decompressobj(GZIP_WINDOW_BITS)
    packed = source.read(PIECE_BYTES)
    while packed:
        try:
            yield unpacker.decompress(packed, PIECE_BYTES)
        except zlib.error as error:
            raise BrokenPackingError from error
        if unpacker.eof:
            packed = unpacker.unused_data or source.read(PIECE_BYTES)
            if packed:
                unpacker = zlib.decompressobj(GZIP_WINDOW_BITS)
        else:
            packed = unpacker.unconsumed_tail or source.read(PIECE_BYTES)
    if not unpacker.eof:
        raise BrokenPackingError


def _unzstd(source: BinaryIO) -> Iterator[bytes]:
    """Yield the contents of a file of one or more zstd frames (RFC 8878)."""
    frames = zstandard.ZstdDecompressor(max_window_size=ZSTD_WINDOW_BYTES_MAX)
    unpacker = frames.decompressobj()
    packed = source.read(ZSTD_PIECE_BYTES)
    while packed:
        try:
            yield unpacker.decompress(packed)
        except zstandard.ZstdError as error:
            raise BrokenPackingError from error
        if unpacker.eof:
            packed = unpacker.unused_data or source.read(ZSTD_PIECE_BYTES)
            if packed:
                unpacker = frames.decompressobj()
        else:
            packed = source.read(ZSTD_PIECE_BYTES)
    if not unpacker.eof:
        raise BrokenPackingError


_UNPACKERS: dict[str, Callable[[BinaryIO], Iterator[bytes]]] = {
    "identity": _plain,
    "": _plain,
    "gzip": _gunzipped,
    "x-gzip": _gunzipped,
    "zstd": _unzstd,
}

"""Ed25519 once more, slowly, by the formulas of RFC 8032, 5.1 alone: affine points, hashlib and integers. For tests only."""

from __future__ import annotations

import hashlib

P = 2**255 - 19
L = 2**252 + 27742317777372353535851937790883648493
D = -121665 * pow(121666, -1, P) % P
ROOT = pow(2, (P - 1) // 4, P)  # of -1
Point = tuple[int, int]
NEUTRAL: Point = (0, 1)


def add(a: Point, b: Point) -> Point:
    """Twisted Edwards addition (complete on this curve)."""
    (x1, y1), (x2, y2) = a, b
    product = D * x1 * x2 * y1 * y2 % P
    x = (x1 * y2 + x2 * y1) * pow(1 + product, -1, P) % P
    y = (y1 * y2 + x1 * x2) * pow(1 - product, -1, P) % P
    return x, y


def times(number: int, point: Point) -> Point:
    """A multiple of a point."""
    found = NEUTRAL
    while number:
        if number & 1:
            found = add(found, point)
        point, number = add(point, point), number >> 1
    return found


def x_of(y: int, sign: int) -> int | None:
    """5.1.3: the x with this sign, if there is one."""
    square = (y * y - 1) * pow(D * y * y + 1, -1, P) % P
    x = pow(square, (P + 3) // 8, P)
    if (x * x - square) % P:
        x = x * ROOT % P
    if (x * x - square) % P:
        return None
    return x if x & 1 == sign else (P - x) % P


BASE: Point = (x_of(4 * pow(5, -1, P) % P, 0) or 0, 4 * pow(5, -1, P) % P)


def encoded(point: Point) -> bytes:
    """5.1.2."""
    return (point[1] | (point[0] & 1) << 255).to_bytes(32, "little")


def _hash(*parts: bytes) -> int:
    return int.from_bytes(hashlib.sha512(b"".join(parts)).digest(), "little")


def _expanded(secret: bytes) -> tuple[int, bytes]:
    digest = hashlib.sha512(secret).digest()
    number = int.from_bytes(digest[:32], "little")
    return number & (2**254 - 8) | 2**254, digest[32:]


def public_of(secret: bytes) -> bytes:
    """5.1.5."""
    return encoded(times(_expanded(secret)[0], BASE))


def sign(secret: bytes, message: bytes) -> bytes:
    """5.1.6."""
    scalar, prefix = _expanded(secret)
    public = encoded(times(scalar, BASE))
    r = _hash(prefix, message) % L
    point = encoded(times(r, BASE))
    return point + ((r + _hash(point, public, message) * scalar) % L).to_bytes(32, "little")


def small_points() -> list[Point]:
    """The eight points whose order divides 8: the multiples of one of order 8, found as L times a random point."""
    y = 2
    while True:
        x = x_of(y, 0)
        if x is not None:
            candidate = times(L, (x, y))
            if times(4, candidate) != NEUTRAL:
                return [times(number, candidate) for number in range(8)]
        y += 1


def small_encodings() -> set[bytes]:
    """All 32-byte strings that decode to one of them, those with y not reduced or a sign too many among them."""
    found = set()
    for x, y in small_points():
        for same in (y, y + P):
            if same < 2**255:
                signs = (0, 1) if x == 0 else (x & 1,)
                found |= {(same | sign << 255).to_bytes(32, "little") for sign in signs}
    return found

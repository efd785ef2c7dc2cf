"""Compiled loops of the convolution: into planes, times the kernel, and out of planes again."""

from __future__ import annotations

from numba import njit

from .vectors import WIDTH, times


@njit(nogil=True, cache=True)
def scatter(index, p, shifts, columns, start, stop):  # pragma: no cover - compiled
    """Put the dipoles (n, 3) of some cells into the columns (x, 3, y, z)."""
    for i in range(start, stop):
        x, y, z = index[i, 0], index[i, 1], index[i, 2]
        for c in range(3):
            columns[x + shifts[0, c], c, y + shifts[1, c], z + shifts[2, c]] = p[i, c]


@njit(nogil=True, cache=True)
def gather(index, columns, shifts, out, start, stop):  # pragma: no cover - compiled
    """The reverse of `scatter`."""
    for i in range(start, stop):
        x, y, z = index[i, 0], index[i, 1], index[i, 2]
        for c in range(3):
            out[i, c] = columns[x + shifts[0, c], c, y + shifts[1, c], z + shifts[2, c]]


@njit(nogil=True, cache=True)
def pad(columns, ny, nz, places, block):  # pragma: no cover - compiled
    """Copy the planes `places` (g,) into a block (g, 3, ly, lz) and fill up with zeros."""
    ly, lz = block.shape[2], block.shape[3]
    for g in range(len(places)):
        x = places[g]
        for c in range(3):
            for y in range(ny):
                for z in range(nz):
                    block[g, c, y, z] = columns[x, c, y, z]
                for z in range(nz, lz):
                    block[g, c, y, z] = 0
            for y in range(ny, ly):
                for z in range(lz):
                    block[g, c, y, z] = 0


@njit(nogil=True, cache=True)
def truncate(block, ny, nz, places, columns):  # pragma: no cover - compiled
    """Copy back what `pad` copied."""
    for g in range(len(places)):
        x = places[g]
        for c in range(3):
            for y in range(ny):
                for z in range(nz):
                    columns[x, c, y, z] = block[g, c, y, z]


@njit(nogil=True, cache=True, fastmath=True)
def multiply(spectrum, block, places, shape, folded, signs, turned):  # pragma: no cover - compiled
    """Replace transformed dipoles by transformed fields.

    Parameters
    ----------
    spectrum : (kx, 6, ky, 2 kz), real and imaginary parts at the non-negative frequencies
    block : (g, 3, ly, 2 rows), real and imaginary parts; the rows may be longer than lz
    places : (g,), the planes' places along x
    shape : (lx, ly, lz)
    folded : three bool; a folded axis holds non-negative frequencies only
    signs : (3,), of xy, xz and yz
    turned : three bool, components that are multiplied by i before and by -i afterwards
    """
    lx, ly, lz = shape
    half_z = lz - 1 if folded[2] else lz // 2
    s, v = spectrum.reshape(-1), block.reshape(-1)
    one = v.dtype.type(1)
    s_stride = spectrum.shape[2] * spectrum.shape[3]
    v_stride = ly * block.shape[3]
    for g in range(len(places)):
        kx, sx = places[g], one
        if not folded[0] and kx > lx // 2:
            kx, sx = lx - kx, -one
        for y in range(ly):
            ky, sy = y, one
            if not folded[1] and y > ly // 2:
                ky, sy = ly - y, -one
            i = 6 * kx * s_stride + ky * spectrum.shape[3]
            j = 3 * g * v_stride + y * block.shape[3]
            xy, xz, yz = sx * sy * signs[0], sx * signs[1], sy * signs[2]
            _turn(block[g], y, lz, turned, one)
            _forwards(s, i, s_stride, v, j, v_stride, half_z + 1, xy, xz, yz)
            # Here the axis is not folded: of a frequency and its opposite one is stored.
            _backwards(
                s, i + 2, s_stride, v, j + 2 * (lz - 1), v_stride, lz - half_z - 1, xy, -xz, -yz
            )
            _turn(block[g], y, lz, turned, -one)


@njit(nogil=True, cache=True, fastmath=True)
def _forwards(s, i, s_stride, v, j, v_stride, n, xy, xz, yz):  # pragma: no cover - compiled
    whole = n - n % WIDTH
    for z in range(0, 2 * whole, 2 * WIDTH):
        times(s, i + z, s_stride, v, j + z, v_stride, xy, xz, yz, False)  # type: ignore[call-arg]
    for z in range(2 * whole, 2 * n, 2):
        _single(s, i + z, s_stride, v, j + z, v_stride, xy, xz, yz)


@njit(nogil=True, cache=True, fastmath=True)
def _backwards(s, i, s_stride, v, j, v_stride, n, xy, xz, yz):  # pragma: no cover - compiled
    whole = n - n % WIDTH
    for z in range(0, 2 * whole, 2 * WIDTH):
        first = j - z - 2 * (WIDTH - 1)
        times(s, i + z, s_stride, v, first, v_stride, xy, xz, yz, True)  # type: ignore[call-arg]
    for z in range(2 * whole, 2 * n, 2):
        _single(s, i + z, s_stride, v, j - z, v_stride, xy, xz, yz)


@njit(nogil=True, cache=True, fastmath=True)
def _single(s, i, s_stride, v, j, v_stride, xy, xz, yz):  # pragma: no cover - compiled
    a, b, c = _at(v, j), _at(v, j + v_stride), _at(v, j + 2 * v_stride)
    p, q = xy * _at(s, i + 3 * s_stride), xz * _at(s, i + 4 * s_stride)
    r = yz * _at(s, i + 5 * s_stride)
    x = _at(s, i) * a + p * b + q * c
    y = p * a + _at(s, i + s_stride) * b + r * c
    z = q * a + r * b + _at(s, i + 2 * s_stride) * c
    v[j], v[j + 1] = x.real, x.imag
    v[j + v_stride], v[j + v_stride + 1] = y.real, y.imag
    v[j + 2 * v_stride], v[j + 2 * v_stride + 1] = z.real, z.imag


@njit(nogil=True, cache=True, fastmath=True)
def _at(array, place):  # pragma: no cover - compiled
    return complex(array[place], array[place + 1])


@njit(nogil=True, cache=True, fastmath=True)
def _turn(plane, y, lz, turned, sign):  # pragma: no cover - compiled
    for c in range(3):
        if turned[c]:
            row = plane[c, y]
            for z in range(lz):
                re, im = row[2 * z], row[2 * z + 1]
                row[2 * z], row[2 * z + 1] = -sign * im, sign * re

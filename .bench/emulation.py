"""The same emulation as plain array scripts: every product and every sum of a product of
matrices rounded to binary16, the sum over k a loop of rank-1 updates.

Several ways to write it are offered for each library; the table takes the fastest on the
machine at hand. Each must give Ulpine's result bit by bit before it is timed. All assume
that nothing leaves the range of binary16, which holds for the data of the table and spares
them work that Ulpine does."""

import time

import numpy as np
import torch

# Adding and subtracting 1.5 2^(e+13) rounds a binary32 number of exponent e to 11
# significant bits; e is at least -14, the least normal exponent of binary16. The split
# x(2^13+1) does so in fewer operations where no subnormal can arise: in sums of numbers
# that are multiples of binary16's least one.
EXPONENT, LEAST = 0x7F800000, (127 - 14) << 23
LIFT, SPLIT = 1.5 * 2.0**13, 2.0**13 + 1


def numpy_half(a, b):
    """Arrays of float16; NumPy rounds after each operation."""
    a, b = a.astype(np.float16), b.astype(np.float16)
    c = np.zeros((a.shape[0], b.shape[1]), np.float16)
    p = np.empty_like(c)
    for k in range(a.shape[1]):
        np.multiply(a[:, k, None], b[None, k, :], out=p)
        np.add(c, p, out=c)
    return c


def numpy_cast(a, b):
    """Arithmetic of float32, results cast to float16 and back."""
    c = np.zeros((a.shape[0], b.shape[1]), np.float32)
    p, h = np.empty_like(c), np.empty(c.shape, np.float16)
    for k in range(a.shape[1]):
        np.multiply(a[:, k, None], b[None, k, :], out=p)
        np.copyto(h, p, casting="same_kind")
        np.copyto(p, h)
        np.add(c, p, out=c)
        np.copyto(h, c, casting="same_kind")
        np.copyto(c, h)
    return c


def numpy_constants(a, b, rows=None):
    """Arithmetic of float32, rounded by adding and subtracting constants, a block of rows
    at a time so that its arrays stay in the cache."""
    rows = rows or a.shape[0]
    out = np.empty((a.shape[0], b.shape[1]), np.float32)
    for at in range(0, a.shape[0], rows):
        c = out[at : at + rows]
        c.fill(0)
        p, t = np.empty_like(c), np.empty_like(c)
        bits = t.view(np.int32)
        for k in range(a.shape[1]):
            np.multiply(a[at : at + rows, k, None], b[None, k, :], out=p)
            np.bitwise_and(p.view(np.int32), EXPONENT, out=bits)
            np.maximum(bits, LEAST, out=bits)
            np.multiply(t, np.float32(LIFT), out=t)
            np.add(p, t, out=p)
            np.subtract(p, t, out=p)
            np.add(c, p, out=c)
            np.multiply(c, np.float32(SPLIT), out=t)
            np.subtract(t, c, out=p)
            np.subtract(t, p, out=c)
    return out


def torch_half(a, b):
    """Tensors of float16; PyTorch rounds after each operation."""
    a, b = torch.from_numpy(a).half(), torch.from_numpy(b).half()
    c = torch.zeros(a.shape[0], b.shape[1], dtype=torch.float16)
    p = torch.empty_like(c)
    for k in range(a.shape[1]):
        torch.mul(a[:, k, None], b[None, k, :], out=p)
        c.add_(p)
    return c.numpy()


def torch_cast(a, b):
    """Arithmetic of float32, results cast to float16 and back."""
    a, b = torch.from_numpy(a), torch.from_numpy(b)
    c = torch.zeros(a.shape[0], b.shape[1])
    p, h = torch.empty_like(c), torch.empty(c.shape, dtype=torch.float16)
    for k in range(a.shape[1]):
        torch.mul(a[:, k, None], b[None, k, :], out=p)
        h.copy_(p)
        p.copy_(h)
        c.add_(p)
        h.copy_(c)
        c.copy_(h)
    return c.numpy()


def torch_constants(a, b, rows=None):
    """numpy_constants with tensors."""
    rows = rows or a.shape[0]
    a, b = torch.from_numpy(a), torch.from_numpy(b)
    out = torch.empty(a.shape[0], b.shape[1])
    for at in range(0, a.shape[0], rows):
        c = out[at : at + rows].zero_()
        p, t = torch.empty_like(c), torch.empty_like(c)
        bits, of = t.view(torch.int32), p.view(torch.int32)
        for k in range(a.shape[1]):
            torch.mul(a[at : at + rows, k, None], b[None, k, :], out=p)
            torch.bitwise_and(of, EXPONENT, out=bits)
            bits.clamp_(min=LEAST)
            t.mul_(LIFT)
            p.add_(t).sub_(t)
            c.add_(p)
            torch.mul(c, SPLIT, out=t)
            torch.sub(t, c, out=p)
            torch.sub(t, p, out=c)
    return out.numpy()


def blocked(way, rows):
    def run(a, b):
        return way(a, b, rows)

    run.__name__ = f"{way.__name__}, {rows} rows at a time"
    return run


WAYS = {
    "NumPy": [numpy_half, numpy_cast, numpy_constants, blocked(numpy_constants, 64)],
    "PyTorch": [torch_half, torch_cast, torch_constants, blocked(torch_constants, 64)],
}


def check(way, a, b, want):
    """Ends the script unless a way of writing the emulation gives the bits wanted."""
    got = way(a, b).astype(np.float32)
    wrong = np.count_nonzero(got.view(np.uint32) != want.view(np.uint32))
    if wrong:
        raise SystemExit(f"{way.__name__}: {wrong} of {got.size} results are not Ulpine's")


def seconds(way, a, b):
    start = time.thread_time()
    way(a, b)
    return time.thread_time() - start

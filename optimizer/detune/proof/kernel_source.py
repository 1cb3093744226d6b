"""Source text of the compiled kernels: straight-line LDL^T over blocks of 64 systems, one text per size n.

A block of packed symmetric matrices is a flat buffer S with entry k of system b at S[k * 64 + b]. All offsets are
constants, every operation is on scalars inside one loop over b, so the compiler turns the loop into vector
instructions. The functions are stated in `block_reference.py`, which computes the same in numpy.
"""

from __future__ import annotations

BLOCK = 64


def _entry(row: int, column: int) -> int:
    return row * (row + 1) // 2 + column


def _load_lower(n: int, name: str, source: str, first: int = 0) -> list[str]:
    return [
        f"{name}{i}{j} = {source}[{(first + _entry(i, j)) * BLOCK} + b]"
        for i in range(n)
        for j in range(i + 1)
    ]


def _real_factor(n: int, growth: bool) -> list[str]:
    """LDL^T of scalars a{i}{j}: leaves l{i}{j}, pivots d{j}, inverses r{j}; optionally the growth g."""
    lines: list[str] = []
    for j in range(n):
        for i in range(j, n):
            terms = "".join(f" - l{i}{k} * t{j}{k}" for k in range(j))
            lines.append(f"t{i}{j} = a{i}{j}{terms}")
        lines += [f"d{j} = t{j}{j}", f"r{j} = 1.0 / d{j}"]
        for i in range(j + 1, n):
            lines.append(f"l{i}{j} = t{i}{j} * r{j}")
            if growth:
                lines.append(f"g = max(g, abs(l{i}{j} * t{i}{j}))")
    return lines


def _function(head: str, body: list[str], before: list[str] | None = None) -> str:
    """A function with one loop over the lanes; what is the same in all lanes is read before it.

    All that is written many times lies in one buffer S: beyond a handful of arrays that might overlap the compiler
    gives up on vectors.
    """
    first = "".join(f"    {line}\n" for line in before or [])
    lines = "\n".join(" " * 8 + line for line in body)
    return f"def {head}:\n{first}    for b in range({BLOCK}):\n{lines}\n"


def factor_source(n: int) -> str:
    """factor_block: in-place LDL^T of positive definite systems and forward solution of one right side."""
    m = n * (n + 1) // 2
    body = _load_lower(n, "a", "S")
    body.append("scale = a00")
    body += [f"scale = max(scale, a{i}{i})" for i in range(1, n)]
    body += _real_factor(n, growth=False)
    body.append("least = d0")
    body += [f"least = min(least, d{j})" for j in range(1, n)]
    for i in range(n):
        terms = "".join(f" - l{i}{k} * y{k}" for k in range(i))
        body.append(f"y{i} = w{i}{terms}")
    for i in range(n):
        for j in range(i):
            body.append(f"S[{_entry(i, j) * BLOCK} + b] = l{i}{j}")
        body.append(f"S[{_entry(i, i) * BLOCK} + b] = r{i}")
        body.append(f"S[{(m + i) * BLOCK} + b] = y{i} * r{i}")
    body.append(f"S[{(m + n) * BLOCK} + b] = " + " + ".join(f"y{i} * y{i} * r{i}" for i in range(n)))
    body.append(f"S[{(m + n + 1) * BLOCK} + b] = 1.0 if least > 1.0e-10 * scale else 0.0")
    return _function("factor_block(S, load)", body, [f"w{i} = load[{i}]" for i in range(n)])


def row_source(n: int) -> str:
    """row_block: row^T X load and row^T X row from a factored block."""
    m = n * (n + 1) // 2
    body = []
    for i in range(n):
        terms = "".join(f" - S[{_entry(i, k) * BLOCK} + b] * y{k}" for k in range(i))
        body.append(f"y{i} = w{i}{terms}")
    value = " + ".join(f"y{i} * S[{(m + i) * BLOCK} + b]" for i in range(n))
    size = " + ".join(f"y{i} * y{i} * S[{_entry(i, i) * BLOCK} + b]" for i in range(n))
    body += [f"S[{(m + n + 2) * BLOCK} + b] = {value}", f"S[{(m + n + 3) * BLOCK} + b] = {size}"]
    return _function("row_block(S, row)", body, [f"w{i} = row[{i}]" for i in range(n)])


def inertia_source(n: int) -> str:
    """inertia_block: negative pivots of A - shift I, with a flag for counts that can be trusted."""
    body = ["s = shift[b]", "g = 0.0"]
    for i in range(n):
        for j in range(i):
            body.append(f"a{i}{j} = A[{_entry(i, j) * BLOCK} + b]")
        body.append(f"a{i}{i} = A[{_entry(i, i) * BLOCK} + b] - s")
    body.append("scale = abs(s)")
    body += [f"scale = max(scale, abs(a{i}{i}))" for i in range(n)]
    body += _real_factor(n, growth=True)
    body.append("least = abs(d0)")
    body += [f"least = min(least, abs(d{j}))" for j in range(1, n)]
    body.append("count[b] = " + " + ".join(f"(1.0 if d{j} < 0.0 else 0.0)" for j in range(n)))
    body.append("good[b] = (1.0 if g <= 1.0e5 * scale else 0.0) * (1.0 if least > 1.0e-12 * scale else 0.0)")
    return _function("inertia_block(A, shift, count, good)", body)


def complex_source(n: int) -> str:
    """complex_block: D q = f for complex symmetric D by LDL^T, with the residual checked.

    S holds D (2m entries), f (2n), q (2n), real parts before imaginary ones, and whether q can be trusted.
    """
    m = n * (n + 1) // 2
    body = _load_lower(n, "ar", "S") + _load_lower(n, "ai", "S", m)
    for j in range(n):
        for i in range(j, n):
            re = "".join(f" - lr{i}{k} * tr{j}{k} + li{i}{k} * ti{j}{k}" for k in range(j))
            im = "".join(f" - lr{i}{k} * ti{j}{k} - li{i}{k} * tr{j}{k}" for k in range(j))
            body += [f"tr{i}{j} = ar{i}{j}{re}", f"ti{i}{j} = ai{i}{j}{im}"]
        body += [
            f"m{j} = 1.0 / (tr{j}{j} * tr{j}{j} + ti{j}{j} * ti{j}{j})",
            f"pr{j} = tr{j}{j} * m{j}",
            f"pi{j} = -ti{j}{j} * m{j}",
        ]
        for i in range(j + 1, n):
            body += [
                f"lr{i}{j} = tr{i}{j} * pr{j} - ti{i}{j} * pi{j}",
                f"li{i}{j} = tr{i}{j} * pi{j} + ti{i}{j} * pr{j}",
            ]
    for i in range(n):
        re = "".join(f" - lr{i}{k} * yr{k} + li{i}{k} * yi{k}" for k in range(i))
        im = "".join(f" - lr{i}{k} * yi{k} - li{i}{k} * yr{k}" for k in range(i))
        body += [f"yr{i} = S[{(2 * m + i) * BLOCK} + b]{re}", f"yi{i} = S[{(2 * m + n + i) * BLOCK} + b]{im}"]
    for i in reversed(range(n)):
        re = "".join(f" - lr{k}{i} * qr{k} + li{k}{i} * qi{k}" for k in range(i + 1, n))
        im = "".join(f" - lr{k}{i} * qi{k} - li{k}{i} * qr{k}" for k in range(i + 1, n))
        body += [
            f"qr{i} = yr{i} * pr{i} - yi{i} * pi{i}{re}",
            f"qi{i} = yr{i} * pi{i} + yi{i} * pr{i}{im}",
            f"S[{(2 * m + 2 * n + i) * BLOCK} + b] = qr{i}",
            f"S[{(2 * m + 3 * n + i) * BLOCK} + b] = qi{i}",
        ]
    body += _residual(n)
    return _function("complex_block(S)", body)


def _residual(n: int) -> list[str]:
    """Largest squared residual against (1e-11)^2 times a squared bound of the terms that were added."""
    m = n * (n + 1) // 2
    body = ["qq = " + " + ".join(f"qr{i} * qr{i} + qi{i} * qi{i}" for i in range(n))]
    body.append("worst = 0.0")
    body.append("bound = 0.0")
    for i in range(n):
        names = [(f"{max(i, k)}{min(i, k)}", k) for k in range(n)]
        re = "".join(f" - ar{e} * qr{k} + ai{e} * qi{k}" for e, k in names)
        im = "".join(f" - ar{e} * qi{k} - ai{e} * qr{k}" for e, k in names)
        body += [f"er = S[{(2 * m + i) * BLOCK} + b]{re}", f"ei = S[{(2 * m + n + i) * BLOCK} + b]{im}"]
        body.append("worst = worst + er * er + ei * ei")
        body.append("bound = bound + " + " + ".join(f"ar{e} * ar{e} + ai{e} * ai{e}" for e, _ in names))
    body.append(f"S[{(2 * m + 4 * n) * BLOCK} + b] = 1.0 if worst <= 1.0e-22 * bound * qq else 0.0")
    return body


def kernel_source(n: int) -> str:
    """Source of the four block kernels for n freedoms (1 to 9)."""
    if not 1 <= n <= 9:
        raise ValueError("compiled kernels exist for 1 to 9 freedoms")
    return "\n\n".join([factor_source(n), row_source(n), inertia_source(n), complex_source(n)])

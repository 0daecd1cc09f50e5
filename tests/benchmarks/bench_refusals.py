"""How long hostile text takes to be refused, as ratios to reading an ordinary limit state in the same run.

Run ``python tests/benchmarks/bench_refusals.py``.
"""

import contextlib
import time

from calibrate.expressions import ExpressionError, parse

ORDINARY = "theta_R * k_p * f_u * d_w**0.9 * (r_t * t_nom)**1.1 - theta_E * (G * e / h_b + C * q / q_k * W_k)"
HOSTILE = {
    "attribute access": "().__class__.__bases__[0].__subclasses__()",
    "call": "__import__('os').system('id')",
    "comprehension": "[x for x in (1, 2, 3)]",
    "walrus": "(x := 1) + x",
    "tower of powers": "9**9**9**9**9**9",
    "deep nesting": "(" * 900 + "x" + ")" * 900,
    "many signs": "-" * 1990 + "x",
    "long number": "9" * 1999,
    "null bytes": "x + \x00 y",
    "too long": "x + " * 600,
}


def seconds(text):
    """Return the shortest of twenty readings."""
    best = float("inf")
    for _ in range(20):
        begin = time.perf_counter()
        with contextlib.suppress(ExpressionError):
            parse(text)
        best = min(best, time.perf_counter() - begin)
    return best


def main():
    usual = seconds(ORDINARY)
    print(f"an ordinary limit state: {usual * 1e3:.2f} ms")
    for name, text in HOSTILE.items():
        print(f"{name:20s} {seconds(text) / usual:6.2f} times that")


if __name__ == "__main__":
    main()

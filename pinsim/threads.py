"""How many threads one rendering runs, as the environment variable PINSIM_THREADS tells at start.

Two is what one picture can use. Where several processes each draw a picture of their own, one thread
each is faster: nobody waits for anybody. No picture depends on the number: what is summed is summed in
the same order.
"""

import os

USUAL = 2
MOST = 64


def _asked() -> int:
    text = os.environ.get("PINSIM_THREADS", "")
    return min(max(int(text), 1), MOST) if text.isascii() and text.isdigit() else USUAL


THREADS = _asked()

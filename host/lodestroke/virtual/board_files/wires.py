"""The virtual board's two pipes to what plays its metal: relay or lock-step engine.

A request is 8 bytes, `<BBhhBB`: kind, spare, duty a, duty b (Q15), enable, bytes of link that
follow. The reply is 8 words `<i`: six raw counts, inputs + (bytes of link that follow << 8), spare.
lodestroke/virtual/channel.py is the other end. Allocates at start-up only.
"""

import os
import struct
import sys
from array import array

EXCHANGE = 0
UP = 1
OWN = 2
RELEASE = 3
RESET = 4
GUARD = 5          # duty a: deadman in ms, duty b: watchdog in ms

REQUEST = "<BBhhBB"
HEAD = 8
TX_MAX = 255

requests = open(int(os.getenv("LODESTROKE_REQUEST_FD") or "-1"), "wb")
replies = open(int(os.getenv("LODESTROKE_REPLY_FD") or "-1"), "rb")
out = bytearray(HEAD + TX_MAX)
reply = array("i", [0] * 8)


def ask(kind, a, b, enable, n_tx):
    """One request and its reply. A closed pipe means that the bench is gone: end at once."""
    struct.pack_into(REQUEST, out, 0, kind, 0, a, b, enable, n_tx)
    requests.write(out, HEAD + n_tx)
    if replies.readinto(reply) != 32:
        sys.exit(1)


def up():
    """The interpreter runs and takes Ctrl-C from here on."""
    ask(UP, 0, 0, 0, 0)

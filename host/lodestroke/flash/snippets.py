"""Python that runs on the board during an install. It needs nothing but the interpreter."""

# Prints one line of JSON: what board this is, and both copies of its slot pointer.
PROBE = """
import json, os, sys
def text(name):
    try:
        with open(name) as f:
            return f.read()
    except OSError:
        return ""
print(json.dumps({"name": sys.implementation[0], "version": list(sys.implementation[1][:3]),
 "machine": getattr(sys.implementation, "_machine", ""), "platform": sys.platform,
 "pointers": [text("pointer.0"), text("pointer.1")]}))
"""

# Defines sums(top): SHA-256 of each file below a folder; of the root itself only its files.
SUMS = """
import binascii, hashlib, json, os
def sums(top):
    found = {}; todo = [""]; b = bytearray(512); v = memoryview(b)
    while todo:
        at = todo.pop()
        try:
            rows = list(os.ilistdir(top + "/" + at if at else top or "/"))
        except OSError:
            rows = []
        for e in rows:
            p = at + "/" + e[0] if at else e[0]
            if e[1] & 0x4000:
                if top:
                    todo.append(p)
                continue
            h = hashlib.sha256()
            with open(top + "/" + p, "rb") as f:
                while True:
                    n = f.readinto(b)
                    if not n:
                        break
                    h.update(v[:n])
            found[p] = binascii.hexlify(h.digest()).decode()
    return found
"""

# Defines clear(top): remove a folder with all that is in it.
CLEAR = """
import os
def clear(top):
    try:
        rows = list(os.ilistdir(top))
    except OSError:
        return
    for e in rows:
        p = top + "/" + e[0]
        if e[1] & 0x4000:
            clear(p)
        else:
            os.remove(p)
    os.rmdir(top)
"""

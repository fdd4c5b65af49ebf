"""What the virtual board runs before anything else: its file system, then boot.py and main.py.

The interpreter falls into its REPL when this file ends, whatever happened in it (option -i).
"""

import os
import sys

import vfs


def mount(root, rom):
    """The board's flash is a folder seen as "/"; these files are a read-only "/rom" beside it."""
    flash = vfs.VfsPosix(root)
    own = vfs.VfsPosix(rom)
    vfs.umount("/")
    vfs.mount(flash, "/")
    vfs.mount(own, "/rom", readonly=True)
    os.chdir("/")
    sys.path[:] = ["", "/lib", "/rom"]


def run(name):
    """Run a file of the board as its start-up code does: in the main module, if it is there."""
    try:
        with open(name) as file:
            text = file.read()
    except OSError:
        return
    exec(compile(text, name, "exec"), globals())


if os.getenv("LODESTROKE_MODE") == "lockstep":
    sys.path[:] = [os.getenv("LODESTROKE_ROM"), os.getenv("LODESTROKE_FIRMWARE")]
    import lockstep_main  # noqa: F401 - runs the firmware
else:
    mount(os.getenv("LODESTROKE_FLASH"), os.getenv("LODESTROKE_ROM"))
    import wires

    wires.up()
    run("boot.py")
    if os.getenv("LODESTROKE_MAIN") == "1":
        run("main.py")

"""Giving up root: it is needed to open a port, and for nothing after that."""

import ctypes
import os
import sys

NO_NEW_PRIVILEGES = 38  # prctl(2): PR_SET_NO_NEW_PRIVS


def give_up_root() -> str:
    """Becomes the user who called sudo, for good.

    Returns:
        A remark for the reader where root had to be kept, else "".

    Raises:
        OSError: Root could not be given up, though there is somebody to give it up to.
    """
    if not hasattr(os, "geteuid") or os.geteuid() != 0:
        _no_new_privileges()
        return ""
    user, group = os.environ.get("SUDO_UID", ""), os.environ.get("SUDO_GID", "")
    if not (user.isdigit() and group.isdigit()) or int(user) == 0:
        _no_new_privileges()
        return "running as root all the time; start it with sudo from a user of your own instead"
    os.setgroups([])
    os.setresgid(int(group), int(group), int(group))
    os.setresuid(int(user), int(user), int(user))
    _no_new_privileges()
    if 0 in os.getresuid() or 0 in os.getresgid():
        raise OSError("root could not be given up")
    return ""


def _no_new_privileges() -> None:
    """Lets no program that is started from here gain rights (Linux)."""
    if sys.platform.startswith("linux"):
        ctypes.CDLL(None, use_errno=True).prctl(NO_NEW_PRIVILEGES, 1, 0, 0, 0)

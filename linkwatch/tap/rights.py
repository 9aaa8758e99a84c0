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
    caller = _caller()
    if caller is None:
        _no_new_privileges()
        return "running as root all the time; start it with sudo from a user of your own instead"
    user, group = caller
    os.setgroups([])
    os.setresgid(group, group, group)
    os.setresuid(user, user, user)
    _no_new_privileges()
    if 0 in os.getresuid() or 0 in os.getresgid():
        raise OSError("root could not be given up")
    return ""


def hidden_from_caller() -> str:
    """Returns a file of the interpreter that who called sudo may not read, or "".

    A face that loads modules as it goes would fail at the first of them, once root is given up.
    """
    caller = _caller() if hasattr(os, "geteuid") and os.geteuid() == 0 else None
    if caller is None:
        return ""
    user, group = caller
    os.setegid(group)
    os.seteuid(user)
    try:
        library = os.__file__
        return "" if os.access(library, os.R_OK, effective_ids=True) else library
    finally:
        os.seteuid(0)
        os.setegid(0)


def _caller() -> tuple[int, int] | None:
    """Returns the user and group that called sudo, None where that was nobody but root."""
    user, group = os.environ.get("SUDO_UID", ""), os.environ.get("SUDO_GID", "")
    if not (user.isdigit() and group.isdigit()) or int(user) == 0:
        return None
    return int(user), int(group)


def _no_new_privileges() -> None:
    """Lets no program that is started from here gain rights (Linux)."""
    if sys.platform.startswith("linux"):
        ctypes.CDLL(None, use_errno=True).prctl(NO_NEW_PRIVILEGES, 1, 0, 0, 0)

"""Giving up root, tried in processes of their own: it cannot be taken back."""

import json
import os
import subprocess
import sys
import textwrap

import pytest

NOBODY = 65534  # the overflow user of Linux: Documentation/admin-guide/sysctl/kernel.rst
CHILD = """
    import json, os
    from pathlib import Path
    from linkwatch.tap.rights import give_up_root

    remark = give_up_root()
    status = dict(
        line.split(":", 1) for line in Path("/proc/self/status").read_text().splitlines()
    )
    taken_back = []
    for take in (lambda: os.setuid(0), lambda: os.setgid(0), lambda: os.seteuid(0)):
        try:
            take()
            taken_back.append(True)
        except PermissionError:
            taken_back.append(False)
    print(json.dumps({
        "remark": remark,
        "users": status["Uid"].split(),
        "groups": status["Gid"].split(),
        "more_groups": status["Groups"].split(),
        "capabilities": int(status["CapEff"], 16) | int(status["CapPrm"], 16),
        "no_new": status["NoNewPrivs"].strip(),
        "taken_back": taken_back,
    }))
"""

pytestmark = [
    pytest.mark.skipif(not sys.platform.startswith("linux"), reason="needs Linux"),
    pytest.mark.skipif(getattr(os, "geteuid", lambda: 1)() != 0, reason="needs root"),
]


def after(**environment):
    """Returns how a process stands that gave up root with these variables."""
    kept = {name: value for name, value in os.environ.items() if not name.startswith("SUDO_")}
    done = subprocess.run(
        [sys.executable, "-c", textwrap.dedent(CHILD)],
        env=kept | environment,
        capture_output=True,
        check=True,
        text=True,
    )
    return json.loads(done.stdout)


def test_root_becomes_the_user_who_called_sudo_for_good():
    """Every user and group id is the caller's, and neither root nor a capability comes back."""
    now = after(SUDO_UID=str(NOBODY), SUDO_GID=str(NOBODY))
    assert now["users"] == now["groups"] == [str(NOBODY)] * 4
    assert now["more_groups"] == []
    assert now["capabilities"] == 0
    assert now["taken_back"] == [False, False, False]
    assert now["no_new"] == "1"
    assert now["remark"] == ""


@pytest.mark.parametrize(
    "environment",
    [
        {},
        {"SUDO_UID": "0", "SUDO_GID": "0"},
        {"SUDO_UID": str(NOBODY)},
        {"SUDO_UID": "-1", "SUDO_GID": "-1"},
    ],
)
def test_where_root_has_to_stay_it_is_remarked_and_gains_nothing_new(environment):
    """With nobody to become, the reader is told, and programs started from here gain no rights."""
    now = after(**environment)
    assert now["users"] == ["0"] * 4
    assert "root" in now["remark"]
    assert now["no_new"] == "1"


def test_what_the_caller_may_not_read_is_known_before_root_is_given_up():
    """The answer is the system's own, root is still there afterwards, and without sudo it is ""."""
    asked = "import os; from linkwatch.tap.rights import hidden_from_caller as h; print(h())"
    for caller, library in (
        ({"SUDO_UID": str(NOBODY), "SUDO_GID": str(NOBODY)}, os.__file__),
        ({}, ""),
    ):
        kept = {name: value for name, value in os.environ.items() if not name.startswith("SUDO_")}
        told = subprocess.run(
            [sys.executable, "-c", f"{asked}; print(os.geteuid(), os.getegid())"],
            env=kept | caller,
            capture_output=True,
            text=True,
            check=True,
        )
        as_nobody = ["setpriv", f"--reuid={NOBODY}", f"--regid={NOBODY}", "--clear-groups"]
        readable = subprocess.run([*as_nobody, "test", "-r", os.__file__], check=False)
        hidden, ids = told.stdout.splitlines()
        assert hidden == ("" if readable.returncode == 0 else library)
        assert ids == "0 0"

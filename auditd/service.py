"""The systemd user unit of one plan, with what a daemon beside costly work may do and may not."""

from __future__ import annotations

import os
from pathlib import Path

from auditd.errors import BadInput
from auditd.plan import Plan
from auditd.plan_reading import load_plan
from auditd.store.place import store_url

WATCHDOG_S = 120
"""systemd restarts a daemon that has told nothing for so long; it tells every half of it."""
STOP_S = 20
"""The daemon ends within 10 s of SIGTERM; after twice that it is ended."""
NO_RESTART = (64, 65, 73, 75, 78)
"""Exits that a restart cannot mend: usage, bad data, cannot create, held by another, bad plan or store."""
_UNSAFE = "\"'\\"
"""Signs that systemd takes in no program's path, however it is quoted."""

_UNIT = """\
# A systemd user unit for one campaign. To take it into use:
#
#   runaudit service > ~/.config/systemd/user/{name}.service
#   systemctl --user daemon-reload
#   systemctl --user enable --now {name}.service
#
# A user's services end with the user's last session. For a daemon that goes on after you log out, allow
# lingering once; on many machines an administrator has to do it:
#
#   loginctl enable-linger
#
# Filesystem restrictions of a user unit need unprivileged user namespaces. Where the kernel forbids them the
# unit fails with status=217/USER or 226/NAMESPACE: then delete the lines between the two marks.
# Commands of the plan's alerts run under the same restrictions.

[Unit]
Description=Audit of the campaign {title}
StartLimitIntervalSec=600
StartLimitBurst=10

[Service]
Type=notify
NotifyAccess=main
ExecStart={executable} --plan {plan} watch
ExecReload=/bin/kill -HUP $MAINPID
Restart=on-failure
RestartSec=5
RestartPreventExitStatus={no_restart}
WatchdogSec={watchdog_s}
TimeoutStartSec=infinity
TimeoutStopSec={stop_s}
KillMode=mixed
Nice=5

NoNewPrivileges=yes
LockPersonality=yes
RestrictRealtime=yes
RestrictSUIDSGID=yes
RestrictNamespaces=yes
RestrictAddressFamilies=AF_UNIX AF_INET AF_INET6 AF_NETLINK
SystemCallArchitectures=native
SystemCallFilter=@system-service

# --- from here
PrivateUsers=yes
PrivateTmp={private_tmp}
PrivateDevices=yes
ProtectSystem=strict
ProtectKernelTunables=yes
ProtectKernelModules=yes
ProtectControlGroups=yes
{writable}
# --- to here

[Install]
WantedBy=default.target
"""


def unit_text(plan_path: Path, executable: Path) -> str:
    """Return the unit under which `executable` watches the landing of a plan.

    Only the folders of the store and of the report can be written to; of one that does not exist yet, the
    nearest that does.

    Raises
    ------
    PlanError, StoreError
        The plan cannot be used, or its store not where the plan says.
    BadInput
        systemd runs no program of such a path.
    """
    if any(sign in _UNSAFE or not sign.isprintable() for sign in str(executable)):
        raise BadInput(
            f"systemd runs no program whose path has quotes or backslashes: {str(executable)!r}; "
            "install auditd in another folder"
        )
    plan = load_plan(plan_path)
    folders = _writable_folders(plan)
    read = [plan.folder, *(plan.folder / path for path in plan.landing.paths)]
    private_tmp = not any(_is_temporary(folder) for folder in (*folders, *read))
    if not private_tmp:
        folders.append(Path("/tmp"))  # noqa: S108 - said to be writable because the plan lies there
    return _UNIT.format(
        name=unit_name(plan),
        title=_specifiers(" ".join(_printable(plan.campaign.title).split()) or "without a title"),
        executable=_quoted(os.path.abspath(executable)),
        plan=_quoted(str(plan.path)).replace("$", "$$"),
        no_restart=" ".join(str(code) for code in NO_RESTART),
        watchdog_s=WATCHDOG_S,
        stop_s=STOP_S,
        private_tmp="yes" if private_tmp else "no",
        writable="\n".join(f"ReadWritePaths={_quoted(str(folder))}" for folder in folders),
    )


def unit_name(plan: Plan) -> str:
    """Return a name for the unit's file: `runaudit-` and the plan's folder, in plain letters."""
    plain = "".join(sign if sign.isascii() and sign.isalnum() else "-" for sign in plan.folder.name)
    return f"runaudit-{plain.strip('-') or 'plan'}"


def _writable_folders(plan: Plan) -> list[Path]:
    url = store_url(plan)
    folders = [] if url.get_backend_name() != "sqlite" else [Path(url.database or "").parent]
    if plan.report is not None:
        folders.append((plan.folder / plan.report.path).parent)
    return list(dict.fromkeys(_nearest(folder) for folder in folders))


def _nearest(folder: Path) -> Path:
    """Return a folder, or where it does not exist the nearest above it that does."""
    folder = Path(os.path.abspath(folder))
    while not folder.is_dir() and folder != folder.parent:
        folder = folder.parent
    return folder


def _is_temporary(folder: Path) -> bool:
    real = os.path.realpath(folder)
    return any(real == top or real.startswith(top + "/") for top in ("/tmp", "/var/tmp"))  # noqa: S108 - compared only


def _quoted(text: str) -> str:
    """Return a word as a unit file takes it: in quotes, with escapes, and with `%` doubled."""
    signs = []
    for byte in os.fsencode(text):
        sign = chr(byte)
        if sign in '"\\':
            signs.append("\\" + sign)
        elif byte < 32 or byte >= 127:
            signs.append(f"\\x{byte:02x}")
        else:
            signs.append(sign)
    return _specifiers(f'"{"".join(signs)}"')


def _specifiers(text: str) -> str:
    return text.replace("%", "%%")


def _printable(text: str) -> str:
    return "".join(sign if sign.isprintable() else " " for sign in text)

"""Write the sample logs: `python -m auditd.simulate.sample_logs OUT`."""

from __future__ import annotations

import sys
from pathlib import Path

from auditd.errors import AuditdError, CannotCreate
from auditd.simulate.sample_campaign import SampleCampaign, sample_campaign
from auditd.simulate.sample_files import sample_results
from auditd.simulate.sample_texts import plan_text, planted_text, sample_readme

USAGE_EXIT_CODE = 64


def sample_logs() -> dict[str, bytes]:
    """Return the content of every file of `sample_logs/` by its path below it."""
    faulty, clean = sample_campaign("faulty"), sample_campaign("clean")
    files = {
        "README.md": sample_readme(faulty, clean).encode(),
        "planted.json": planted_text(faulty, clean).encode(),
    }
    return files | _edition_files(faulty) | _edition_files(clean)


def write_sample_logs(folder: Path) -> int:
    """Write the sample into a folder and return the number of files; files of other names stay.

    Raises
    ------
    CannotCreate : the folder or a file cannot be written.
    """
    files = sample_logs()
    try:
        for name, content in files.items():
            path = folder / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(content)
    except OSError as error:
        raise CannotCreate(f"{folder}: the sample logs cannot be written: {error}") from error
    return len(files)


def _edition_files(campaign: SampleCampaign) -> dict[str, bytes]:
    results = {f"results/{name}": content for name, content in sample_results(campaign).items()}
    files = {"plan.toml": plan_text(campaign).encode(), **results}
    return {f"{campaign.edition}/{name}": content for name, content in files.items()}


def _write_from_command_line(arguments: list[str]) -> int:
    if len(arguments) != 1 or arguments[0].startswith("-"):
        print("usage: python -m auditd.simulate.sample_logs OUT", file=sys.stderr)
        return USAGE_EXIT_CODE
    try:
        n_files = write_sample_logs(Path(arguments[0]))
    except AuditdError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    print(f"{n_files} files in {arguments[0]}")
    return 0


if __name__ == "__main__":
    sys.exit(_write_from_command_line(sys.argv[1:]))

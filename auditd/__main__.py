"""`python -m auditd` is `runaudit`."""

from auditd.cli.main import run

if __name__ == "__main__":
    run()

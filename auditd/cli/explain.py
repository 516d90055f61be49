"""`runaudit explain`."""

from __future__ import annotations

import textwrap

import click

from auditd.cli.output import print_json, print_table
from auditd.cli.options import json_option

WIDTH = 88
"""Columns of text on a terminal."""

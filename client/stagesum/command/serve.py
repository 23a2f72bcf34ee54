"""``stagesum serve``: put gunicorn in the place of this process."""

from __future__ import annotations

import os
import sys
from importlib.util import find_spec

import click

from stagesum.errors import MissingExtra

NEEDED = ("gunicorn", "flask", "marshmallow", "apispec", "numpy", "scipy")
NO_SERVICE = 3


@click.command()
@click.option("--host", default="127.0.0.1", show_default=True, help="Address to listen on.")
@click.option("--port", type=click.IntRange(1, 65535), default=8000, show_default=True)
@click.option("--workers", type=click.IntRange(min=1), help="Processes; by default one a processor, at most four.")
@click.option("--threads", type=click.IntRange(min=1), help="Requests that a worker takes at once; 4 by default.")
def serve(host: str, port: int, workers: int | None, threads: int | None) -> None:
    """Run the service over HTTP until it is told to stop (Ctrl-C, SIGTERM)."""
    missing = next((name for name in NEEDED if find_spec(name) is None), None)
    if missing:
        click.echo(f"stagesum: {MissingExtra(missing)}", err=True)
        sys.exit(NO_SERVICE)
    words = command_line(host, port, workers, threads)
    sys.stdout.flush()
    os.execv(words[0], words)  # no shell: signals reach gunicorn itself


def command_line(host: str, port: int, workers: int | None, threads: int | None) -> list[str]:
    """Give the words that start gunicorn with the settings of the service."""
    bind = f"[{host}]:{port}" if ":" in host else f"{host}:{port}"
    words = [sys.executable, "-m", "gunicorn", "-c", "python:stagesum_server.gunicorn_settings", "--bind", bind]
    words += ["--workers", str(workers)] if workers else []
    words += ["--threads", str(threads)] if threads else []
    return [*words, "stagesum_server.app:create_app()"]

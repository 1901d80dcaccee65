"""The command line: ``ladderband serve``, ``demo``, ``describe``, ``settings``.

Nothing heavy is imported before the environment of the compiled kernels is set.
"""

from __future__ import annotations

import argparse
import dataclasses
import ipaddress
import os
import sys
from collections.abc import Sequence
from pathlib import Path

from ladderband import __version__
from ladderband.settings import SettingError, Settings, load_settings, settings_table


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command; returns the exit status."""
    options = _parser().parse_args(arguments)
    try:
        status: int = options.run(options)
    except (SettingError, CommandError) as error:
        print(f"ladderband: {error}", file=sys.stderr)
        return 2
    return status


class CommandError(Exception):
    """A command cannot run; the message says why and what to do."""


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="ladderband",
        description="Overlap integrals, line lists and bands of vibrational transitions over HTTP.",
    )
    parser.add_argument("--version", action="version", version=f"ladderband {__version__}")
    commands = parser.add_subparsers(required=True, metavar="COMMAND")
    serve = commands.add_parser("serve", help="run the service")
    for item in dataclasses.fields(Settings):
        _add_option(serve, item.name, item.default, item.metadata["meaning"])
    serve.set_defaults(run=_serve)
    demo = commands.add_parser("demo", help="start the service, send one example, show the answer")
    demo.add_argument("--out", type=Path, default=Path(), help="folder for the SVG (default: here)")
    demo.set_defaults(run=_demo)
    describe = commands.add_parser("describe", help="write the OpenAPI document and the examples")
    describe.add_argument(
        "--out", type=Path, default=Path("openapi"), help="folder (default: openapi)"
    )
    describe.add_argument("--check", action="store_true", help="write nothing, fail when stale")
    describe.set_defaults(run=_describe)
    settings = commands.add_parser("settings", help="list all settings")
    settings.set_defaults(run=_settings)
    return parser


def _add_option(parser: argparse.ArgumentParser, name: str, default: object, meaning: str) -> None:
    option = "--" + name.replace("_", "-")
    help_text = f"{meaning} (default: {default})" if default != "" else meaning
    if isinstance(default, bool):
        parser.add_argument(
            option, action=argparse.BooleanOptionalAction, default=None, help=help_text
        )
    else:
        kind = type(default).__name__.upper()
        parser.add_argument(option, default=None, metavar=kind, help=help_text)


def _serve(options: argparse.Namespace) -> int:
    names = [item.name for item in dataclasses.fields(Settings)]
    settings = load_settings(**{name: getattr(options, name) for name in names})
    _refuse_open_host(settings)
    prepare_environment(settings)
    from ladderband.web import server

    server.run(settings)
    return 0


def _refuse_open_host(settings: Settings) -> None:
    if settings.allow_open or _is_loopback(settings.host):
        return
    raise CommandError(
        f"{settings.host} can be reached from other machines, and the service asks nobody for a "
        "key. Listen on 127.0.0.1 behind a proxy that does, or add --allow-open when everybody who "
        "can reach this address may use the service."
    )


def _is_loopback(host: str) -> bool:
    if host == "localhost":
        return True
    try:
        return ipaddress.ip_address(host).is_loopback
    except ValueError:
        return False


def prepare_environment(settings: Settings) -> None:
    """Folders and variables that must be there before numpy, numba or prometheus are imported.

    One BLAS thread a process: the web threads are the parallelism. numba fails to import where its
    cache cannot be written, so it gets a folder that can.

    Raises
    ------
    CommandError
        The data folder cannot be written.
    """
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ.setdefault(name, "1")
    kernels = settings.data_path / "kernels"
    counters = settings.data_path / f"counters-{os.getpid()}"
    try:
        kernels.mkdir(parents=True, exist_ok=True)
        counters.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise CommandError(
            f"The data folder {settings.data_path} cannot be written ({error.strerror}); choose "
            "another with --data-dir or LADDERBAND_DATA_DIR."
        ) from None
    os.environ.setdefault("NUMBA_CACHE_DIR", str(kernels))
    os.environ.setdefault("MPLCONFIGDIR", str(kernels))  # its font list, same need
    os.environ["PROMETHEUS_MULTIPROC_DIR"] = str(counters)


def _demo(options: argparse.Namespace) -> int:
    from ladderband.demo import run_demo

    return run_demo(options.out)


def _describe(options: argparse.Namespace) -> int:
    from ladderband.web.description import stale_files, write_files

    if not options.check:
        print("\n".join(f"wrote {path}" for path in write_files(options.out)))
        return 0
    stale = stale_files(options.out)
    if stale:
        raise CommandError(
            "stale: " + ", ".join(map(str, stale)) + ". Refresh with: ladderband describe"
        )
    return 0


def _settings(options: argparse.Namespace) -> int:
    print(settings_table())
    return 0

"""The command line: ``serve``, ``engine``, ``keys``, ``sweep``, ``demo``, ``describe``, ``settings``.

Nothing heavy is imported before the environment of the compiled kernels is set.
"""

from __future__ import annotations

import argparse
import dataclasses
import ipaddress
import os
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

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


if TYPE_CHECKING:
    from ladderband.jobs.database import Database


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
    _add_settings(serve, [item.name for item in dataclasses.fields(Settings)])
    serve.set_defaults(run=_serve)
    _add_job_commands(commands)
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


def _add_job_commands(commands: Any) -> None:
    engine = commands.add_parser("engine", help="work jobs off on this machine, without the web")
    engine.add_argument(
        "--interactive", action="store_true", help="only what somebody waits for at this moment"
    )
    _add_settings(engine, ENGINE_SETTINGS)
    engine.set_defaults(run=_engine)
    keys = commands.add_parser("keys", help="add, list and revoke API keys")
    actions = keys.add_subparsers(required=True, metavar="ACTION")
    add = actions.add_parser("add", help="make a key and show it once")
    add.add_argument("name", help="whose key it is")
    revoke = actions.add_parser("revoke", help="end a key")
    revoke.add_argument("id", help="its id, as shown by list")
    shown = actions.add_parser("list", help="show all keys without their secrets")
    for action, run in ((add, _add_key), (shown, _list_keys), (revoke, _revoke_key)):
        _add_settings(action, RECORD_SETTINGS)
        action.set_defaults(run=run)
    sweep = commands.add_parser("sweep", help="send a sweep to a service and write its table")
    sweep.add_argument("file", type=Path, help="the sweep's request as JSON")
    sweep.add_argument("--url", default="http://127.0.0.1:8080", help="address of the service")
    sweep.add_argument("--table", type=Path, help="CSV whose header row holds JSON pointers")
    sweep.add_argument("--out", type=Path, help="file to write (default: standard output)")
    formats = ["csv", "ndjson", "npy", "json", "arrow", "parquet"]
    sweep.add_argument("--format", choices=formats, default="csv")
    sweep.set_defaults(run=_sweep)


RECORD_SETTINGS = ("data_dir", "database_url")
ENGINE_SETTINGS = (
    *RECORD_SETTINGS,
    "engine",
    "engine_processes",
    "job_work_s",
    "job_memory_bytes",
    "keep_results_days",
    "table_elements",
)
KEY_VARIABLE = "LADDERBAND_KEY"
"""Environment variable with the client's key: a command line can be read by other users."""


def _add_settings(parser: argparse.ArgumentParser, names: Sequence[str]) -> None:
    for item in dataclasses.fields(Settings):
        if item.name in names:
            _add_option(parser, item.name, item.default, item.metadata["meaning"])


def _settings_of(options: argparse.Namespace) -> Settings:
    names = [item.name for item in dataclasses.fields(Settings) if hasattr(options, item.name)]
    return load_settings(**{name: getattr(options, name) for name in names})


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
    settings = _settings_of(options)
    prepare_environment(settings)
    _refuse_open_host(settings)
    from ladderband.web import service

    try:
        with _storage():
            service.run(settings)
    except OSError as error:
        where = f"{settings.host}:{settings.port}"
        raise CommandError(f"{where} cannot be listened on: {error.strerror}.") from None
    return 0


@contextmanager
def _storage() -> Iterator[None]:
    """Turn a database that is away into a sentence."""
    from ladderband.jobs.database import StorageUnavailable

    try:
        yield
    except StorageUnavailable as error:
        raise CommandError(str(error)) from None


@contextmanager
def _records(settings: Settings) -> Iterator[Database]:
    """The job records, their tables made if need be."""
    from ladderband.jobs.database import Database

    database = Database(settings.records_url)
    with _storage():
        database.migrate()
        yield database
    database.close()


def _engine(options: argparse.Namespace) -> int:
    settings = _settings_of(options)
    prepare_environment(settings)
    # the compute processes take their limits from the environment
    os.environ.update(settings.environment())
    with _records(settings):
        pass
    from ladderband.jobs.node import run_engine
    from ladderband.web.operations import configure_logging
    from ladderband.web.service import node_options

    configure_logging()
    run_engine(node_options(settings, interactive=options.interactive))
    return 0


def _add_key(options: argparse.Namespace) -> int:
    from ladderband.jobs.keys import add_key

    with _records(_settings_of(options)) as database:
        info, secret = add_key(database, options.name)
    print(f"{secret}\nThis is key {info.id}. It is shown only now; keep it safe.")
    return 0


def _list_keys(options: argparse.Namespace) -> int:
    from datetime import UTC, datetime

    from ladderband.jobs.keys import list_keys

    with _records(_settings_of(options)) as database:
        for key in list_keys(database):
            made = datetime.fromtimestamp(key.created, UTC).isoformat(timespec="seconds")
            print(f"{key.id}  {made}  {'revoked' if key.revoked else 'valid  '}  {key.name}")
    return 0


def _revoke_key(options: argparse.Namespace) -> int:
    from ladderband.jobs.keys import revoke_key

    with _records(_settings_of(options)) as database:
        if not revoke_key(database, options.id):
            raise CommandError(f"There is no valid key {options.id}; see ladderband keys list.")
    return 0


def _sweep(options: argparse.Namespace) -> int:
    try:
        from ladderband.client import ClientError, SweepOrder, run_sweep
    except ModuleNotFoundError as error:
        raise CommandError(
            f"This command needs {error.name}: pip install 'ladderband[client]'."
        ) from None
    order = SweepOrder(
        options.url,
        options.file,
        options.table,
        options.out,
        options.format,
        os.environ.get(KEY_VARIABLE),
    )
    try:
        run_sweep(order)
    except (ClientError, OSError, ValueError) as error:
        raise CommandError(str(error)) from None
    return 0


def _refuse_open_host(settings: Settings) -> None:
    if settings.allow_open or _is_loopback(settings.host):
        return
    from ladderband.jobs.keys import list_keys

    with _records(settings) as database:
        if any(key.revoked is None for key in list_keys(database)):
            return
    raise CommandError(
        f"{settings.host} can be reached from other machines, and there is no key yet that the "
        "service could ask for. Make one with: ladderband keys add NAME. Or listen on 127.0.0.1, "
        "or add --allow-open when everybody who can reach this address may use the service."
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

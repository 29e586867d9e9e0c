"""Commands that keep the store: copies, exports, proofs; those that sign are in `treering.cli.signing`."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path
from typing import Any

from cyclopts import App

from treering.cli.output import EXIT_DONE, EXIT_REFUSED, remark, say, say_json

store = App(name="store", help_format="plaintext", version_flags=[])


@store.command(name="copy")
def copy_store(target: Path, folder: Path = Path(), /, *, json: bool = False) -> int:
    """Copy the store into a new SQLite file while it is in use, and audit the copy.

    Parameters
    ----------
    target : Path
        File to make.
    folder : Path
        The review folder.
    json : bool
        Print JSON.
    """
    from treering.store.audit import audit_store

    with open_store_of(folder) as opened:
        review = opened.review
        opened.copy(target)
    failed = [check for check in audit_store(target, review=review) if not check.holds]
    for check in failed:
        remark(check.line())
        for fault in check.faults:
            remark(f"    {fault}")
    from treering.store import open_store

    with open_store(target) as made:
        head = made.head()
    tell({"file": str(target), "size": head.size, "root": head.root, "sound": not failed}, json)
    return EXIT_REFUSED if failed else EXIT_DONE


@store.command(name="audit")
def audit_copy(
    target: str, /, *, checkpoint: str | None = None, report: Path | None = None, json: bool = False
) -> int:
    """Audit a store by itself, such as a copy or an import, without its review folder.

    Parameters
    ----------
    target : str
        SQLite file or PostgreSQL URL.
    checkpoint : str, optional
        A head as printed, "SIZE ROOT", that the store must extend.
    report : Path, optional
        An old report.json to take that head from.
    json : bool
        Print JSON.
    """
    from treering.store.audit import audit_store

    checks = audit_store(target, checkpoints=_heads(checkpoint, report))
    if json:
        say_json([check.to_dict() for check in checks])
    else:
        for check in checks:
            say(check.line())
            for fault in check.faults:
                say(f"    {fault}")
    return EXIT_DONE if all(check.holds for check in checks) else EXIT_REFUSED


@store.command(name="export")
def export_store(
    target: Path, folder: Path = Path(), /, *, version: int | None = None, json: bool = False
) -> int:
    """Write the store, or what one version saw, as CSV files with dictionary and proofs.

    Parameters
    ----------
    target : Path
        Folder to make.
    folder : Path
        The review folder.
    version : int, optional
        Only the entries under the head of this version.
    json : bool
        Print JSON.
    """
    from treering.store.exporting import export

    with open_store_of(folder) as opened:
        made = export(opened, target, version=version)
    tell({"folder": str(target), **asdict(made.head), "tables": made.tables}, json)
    remark("The export holds every entry, addresses of panel members included: think before handing it on.")
    return EXIT_DONE


@store.command(name="import")
def import_store(source: Path, target: str, /, *, json: bool = False) -> int:
    """Make a store of an export: same entries, dates, hashes and heads.

    Parameters
    ----------
    source : Path
        Folder of the export; it is checked first.
    target : str
        SQLite file to make, or URL of an empty PostgreSQL database.
    json : bool
        Print JSON.
    """
    from treering.store.importing import import_export

    package = import_export(source, target)
    tell({"review": package.review, "version": package.version, **asdict(package.head)}, json)
    return EXIT_DONE


@store.command
def prove(
    entry: str,
    folder: Path = Path(),
    /,
    *,
    version: int | None = None,
    size: int | None = None,
    to: Path | None = None,
) -> int:
    """Prove that an entry is in the store, for someone who has a printed head only.

    Parameters
    ----------
    entry : str
        Number of the entry, or its key.
    folder : Path
        The review folder.
    version : int, optional
        Prove it against the head of this version; against the head of today by default.
    size : int, optional
        Prove it against the head of this size.
    to : Path, optional
        File to write; printed when left out.
    """
    from treering.store.proofs import inclusion_document

    with open_store_of(folder) as opened:
        place = seq_of(opened, entry)
        return _give(inclusion_document(opened, place, size_of(opened, version, size)), to)


@store.command(name="prove-extends")
def prove_extends(
    first: int,
    folder: Path = Path(),
    /,
    *,
    version: int | None = None,
    size: int | None = None,
    to: Path | None = None,
) -> int:
    """Prove that a later head extends an earlier one: nothing before it was changed.

    Parameters
    ----------
    first : int
        Size of the earlier head.
    folder : Path
        The review folder.
    version : int, optional
        The later head is that of this version; that of today by default.
    size : int, optional
        Size of the later head.
    to : Path, optional
        File to write; printed when left out.
    """
    from treering.store.proofs import consistency_document

    with open_store_of(folder) as opened:
        return _give(consistency_document(opened, first, size_of(opened, version, size)), to)


@store.command
def verify(
    file: Path,
    /,
    *,
    checkpoint: str | None = None,
    report: Path | None = None,
    key: Path | None = None,
    json: bool = False,
) -> int:
    """Check a proof, an export or a signature, without the store.

    Parameters
    ----------
    file : Path
        File of a proof or a signature, or folder of an export.
    checkpoint : str, optional
        A head as printed, "SIZE ROOT", that the file must lead to.
    report : Path, optional
        An old report.json to take that head from.
    key : Path, optional
        The signer's public key.
    json : bool
        Print JSON.
    """
    from treering.store.verifying import verify_path

    heads = _heads(checkpoint, report)
    shown = verify_path(file, heads=heads, public_key=key)
    tell(shown, json)
    if not heads and "signed by" not in shown:
        remark("It holds in itself. Compare its head with a printed one: --checkpoint or --report.")
    return EXIT_DONE


# Loaded only when used, so that their help stands here.
_SIGNING = {
    "make-key": ("make_signing_key", "Make a key for signatures, outside the review folder."),
    "sign": ("sign", "Sign the head of today, the head of a version, or one entry in a person's name."),
}
for _name, (_function, _help) in _SIGNING.items():
    store.command(f"treering.cli.signing:{_function}", name=_name, help=_help)


def open_store_of(folder: Path) -> Any:
    """Open the evidence store of a review."""
    from treering.update import open_evidence, read_review

    return open_evidence(read_review(folder))


def _heads(checkpoint: str | None, report: Path | None) -> list[Any]:
    """Return the heads from trusted sources that were given."""
    from treering.store.checkpoint import checkpoint_of_report, parse_checkpoint

    heads = [parse_checkpoint(checkpoint)] if checkpoint else []
    return heads + ([checkpoint_of_report(report)] if report else [])


def seq_of(opened: Any, entry: str) -> int:
    """Return the number of an entry that is named by number or key."""
    if entry.isdigit():
        return int(entry)
    found = opened.state().get(entry)
    if found is None:
        raise wrong(
            "there is no live entry on this key.", "a number or key that treering history lists", entry
        )
    return int(found.seq)


def size_of(opened: Any, version: int | None, size: int | None) -> int:
    """Return the size of the head asked for."""
    if version is None:
        return int(opened.head().size) if size is None else size
    versions = opened.versions()
    if not 1 <= version <= len(versions):
        raise wrong("there is no such version.", f"1 to {len(versions)}", version)
    return int(versions[version - 1]["entries"])


def wrong(text: str, expected: str, found: object = None) -> Exception:
    """Return the error for something that was asked for and is not there."""
    from treering.errors import StoreError

    return StoreError(text, found=found, expected=expected)


def _give(document: dict[str, Any], to: Path | None) -> int:
    from json import dumps

    return write_out(dumps(document, indent=2, ensure_ascii=False) + "\n", to)


def write_out(text: str, to: Path | None) -> int:
    """Print a text, or write it to a new file."""
    if to is None:
        say(text.rstrip("\n"))
        return EXIT_DONE
    try:
        with to.open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except OSError as error:
        raise wrong("the file cannot be written.", "a new file in a folder that is there", error) from error
    remark(f"Written to {to}.")
    return EXIT_DONE


def tell(facts: dict[str, Any], json: bool) -> None:
    """Print facts, one a line or as JSON."""
    if json:
        say_json(facts)
        return
    for name, value in facts.items():
        shown = ", ".join(f"{k} {v}" for k, v in value.items()) if isinstance(value, dict) else value
        say(f"{name}: {shown}")

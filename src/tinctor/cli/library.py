"""`tinctor library`: what is in the collections, and whether it is sound."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated

import typer

from tinctor.cli.faults import Exit, fail, guarded
from tinctor.cli.library_add import EPILOG, add
from tinctor.cli.output import Format, put

__all__ = ["app"]

app = typer.Typer(help="List, show, check and add to the collections of component records.", no_args_is_help=True)
app.command("add", epilog=EPILOG)(add)


@app.command("list")
def list_records(
    collection: Annotated[str | None, typer.Argument(help="One collection, by name or folder; all when left out.")] = None,
    output_format: Annotated[Format, typer.Option("--format", "-f", help="Form of the result.")] = Format.TABLE,
) -> None:
    """Names of the collections and their records."""
    with guarded(as_json=output_format is Format.JSON):
        from tinctor.library import collections, load_collection
        from tinctor.report.library_text import collection_lines

        found = [load_collection(name) for name in ([collection] if collection else collections())]
        if output_format is Format.JSON:
            document = [{"name": c.name, "title": c.title, "invented": c.invented, "records": list(c.records)} for c in found]
            put(json.dumps({"schema": "library-list/1", "collections": document}, ensure_ascii=False) + "\n", None)
        elif output_format is Format.CSV:
            rows = [f"{c.name},{name}" for c in found for name in c.records]
            put("\n".join(["collection,record", *rows]) + "\n", None)
        else:
            put("\n".join(line for c in found for line in collection_lines(c)) + "\n", None)


@app.command()
def show(
    record: Annotated[str, typer.Argument(help="COLLECTION/RECORD, for example published/methylene-blue.")],
    output_format: Annotated[
        Format, typer.Option("--format", "-f", help="Form of the result; csv is the spectrum.")
    ] = Format.TABLE,
) -> None:
    """One record: identity, source, conditions, uncertainty and spectrum."""
    with guarded(as_json=output_format is Format.JSON):
        from tinctor.errors import InputError
        from tinctor.library import load_collection
        from tinctor.report.library_text import record_csv, record_document, record_lines

        collection_name, _, name = record.rpartition("/")
        if not collection_name:
            raise InputError.single(
                "record-name", "", f"expected COLLECTION/RECORD, found {record!r}", "for example published/methylene-blue"
            )
        collection = load_collection(collection_name)
        collection.component(name)
        found = collection.records[name]
        if output_format is Format.JSON:
            put(json.dumps(record_document(found), ensure_ascii=False) + "\n", None)
        else:
            put(record_csv(found) if output_format is Format.CSV else "\n".join(record_lines(found)) + "\n", None)


@app.command()
def check(
    folder: Annotated[Path | None, typer.Argument(help="Folder of one collection; all collections when left out.")] = None,
) -> None:
    """Check units, grids, duplicates, registry numbers, citations and check points. Exit code 3 when something is wrong."""
    with guarded():
        from tinctor.library import check_collection, collections, load_collection

        folders = [folder] if folder else [load_collection(name).folder for name in collections()]
        findings = []
        for place in folders:
            found = check_collection(place)
            findings += [f"{place.name}/{f.record}: {f.code}: {f.message}" for f in found]
            if not found:
                typer.echo(f"{place.name}: sound", err=True)
        if findings:
            fail("\n".join(findings), Exit.INPUT_REFUSED)

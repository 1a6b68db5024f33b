"""`tinctor library add`: file a result as a new record, with the operator's word."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from tinctor.cli.faults import guarded
from tinctor.cli.reading import say

__all__ = ["EPILOG", "add"]

EPILOG = """
Example:

tinctor library add lot-12.json --to my-dyes --title "Tarn blue, lot 12" --operator "A. Moor" --new-collection "Our dyes"

Then: tinctor resolve bath.csv --library ./my-dyes -c tarn-blue-lot-12
"""


def add(
    result: Annotated[str, typer.Argument(help="JSON result of standards, mixtures or transfer; - is standard input.")],
    to: Annotated[Path, typer.Option(help="Folder of the collection.")],
    title: Annotated[str, typer.Option(help="What the substance is, in words.")],
    operator: Annotated[str, typer.Option(help="Who vouches for identity and conditions.")],
    name: Annotated[str | None, typer.Option(help="Of the record: a-z, 0-9, hyphens (default: that of the component).")] = None,
    component: Annotated[str | None, typer.Option(help="Which component, of a result with several.")] = None,
    formula: Annotated[str | None, typer.Option(help="For example C16H18ClN3S.")] = None,
    cas: Annotated[str | None, typer.Option(help="CAS registry number.")] = None,
    lot: Annotated[str | None, typer.Option(help="Lot of the product.")] = None,
    analyte: Annotated[str | None, typer.Option(help="Records of one analyte are also reported as a total.")] = None,
    caution: Annotated[str, typer.Option(help="Printed with every result that rests on the record.")] = "",
    citation: Annotated[str | None, typer.Option(help="Where the numbers come from (default: the source of the result).")] = None,
    link: Annotated[str | None, typer.Option(help="Web address or doi:...")] = None,
    licence: Annotated[str | None, typer.Option(help="Of the numbers.")] = None,
    scale_relative_u: Annotated[
        float | None, typer.Option(help="Relative standard uncertainty of the scale, where the result has none.")
    ] = None,
    scale_reason: Annotated[str | None, typer.Option(help="Why it is that large.")] = None,
    new_collection: Annotated[
        str | None, typer.Option(metavar="TITLE", help="Make the folder a collection of this title when it is none.")
    ] = None,
) -> None:
    """File a result as a new record (TOML and CSV). A record that is there is never changed: a new lot is a new record."""
    with guarded():
        from tinctor.files.source import bytes_of
        from tinctor.files.strict_json import parse
        from tinctor.library.add import add_record, create_collection
        from tinctor.operations.record_of import Word, record_of

        word = Word(
            operator=operator,
            title=title,
            name=name,
            component=component,
            formula=formula,
            cas=cas,
            lot=lot,
            analyte=analyte,
            caution=caution,
            citation=citation,
            link=link,
            licence=licence,
            scale_relative_u=scale_relative_u,
            scale_reason=scale_reason,
        )
        document, spectrum = record_of(parse(bytes_of(result)), word)
        if new_collection is not None:
            create_collection(to, new_collection)
        record = add_record(to, document, spectrum)
        say([f"filed as {record.reference}: {record.title}", f"SHA-256 {record.sha256}"])

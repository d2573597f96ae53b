"""The files of a finished job, from a server into a folder."""

from pathlib import Path
from typing import Any
from urllib.parse import quote

from api.commands.client import Client
from api.commands.folders import RESULTS
from workers.outputs.names import SHEET, file_name


def fetch_files(client: Client, here: str, results: dict[str, Any], folder: Path) -> None:
    """Fetch the results and every file that was made with the job.

    here : path of the job on the server
    """
    client.fetch(f"{here}/results", folder / RESULTS)
    client.fetch(f"{here}/sheet", folder / SHEET)
    for table in results["files"]["tables"]:
        target = folder / "tables" / f"{file_name(table)}.csv"
        client.fetch(f"{here}/tables/{quote(table, safe='')}.csv", target)
    # Names go into addresses and file names by our own rules; paths in an answer are not followed.
    for case in results["files"]["fields"]:
        target = folder / "fields" / f"{file_name(case)}.vtu"
        client.fetch(f"{here}/fields/{quote(case, safe='')}.vtu", target)
    for case, pictures in results["files"]["previews"].items():
        for quantity in pictures:
            target = folder / "previews" / file_name(case) / f"{file_name(quantity)}.png"
            client.fetch(f"{here}/previews/{quote(case, safe='')}/{quote(quantity)}.png", target)
    if "convergence" in results["files"]:
        client.fetch(f"{here}/convergence.png", folder / "convergence.png")
    made = results["files"]["envelope"]
    names = [f"{measure}.png" for measure in made["previews"]]
    for name in [*names, "fields.vtu"] if "fields" in made else names:
        target = folder / "envelope" / file_name(name)
        client.fetch(f"{here}/envelope/{quote(name, safe='')}", target)
    for line in results["files"]["lines"]:
        target = folder / "lines" / f"{file_name(line)}.png"
        client.fetch(f"{here}/lines/{quote(line, safe='')}.png", target)

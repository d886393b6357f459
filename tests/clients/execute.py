"""Runs a notebook through nbclient, as an editor's server would.

    python3 execute.py NOTEBOOK EXECUTED

The notebook runs in its own folder, with the kernel that it names. Exits 1 when a cell fails.
"""

import pathlib
import sys

import nbclient
import nbformat


def main(notebook, executed):
    node = nbformat.read(notebook, as_version=4)
    client = nbclient.NotebookClient(
        node,
        timeout=600,
        startup_timeout=600,
        resources={"metadata": {"path": str(pathlib.Path(notebook).resolve().parent)}},
    )
    try:
        client.execute()
    finally:
        nbformat.validate(node)
        nbformat.write(node, executed)


if __name__ == "__main__":
    try:
        main(*sys.argv[1:])
    except nbclient.exceptions.CellExecutionError as failed:
        sys.exit(f"a cell failed: {failed}")

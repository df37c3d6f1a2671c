"""Where the files that come with the program are: templates and demo workbooks."""

from pathlib import Path


def shipped(name: str) -> Path:
    """Folder ``name`` (``templates_xlsx``, ``inbox_demo``), in an installed wheel or a source checkout.

    Raises
    ------
    FileNotFoundError
        The installation is not complete.
    """
    package = Path(__file__).resolve().parent
    for folder in (package / "_shipped" / name, package.parent / name):
        if folder.is_dir():
            return folder
    raise FileNotFoundError(f"the folder {name} that comes with ledgersolve is missing; install it again")

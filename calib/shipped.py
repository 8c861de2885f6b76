"""Where the folders are that travel with the program: migrations, sample runs."""

from pathlib import Path

from calib.errors import CalibError


def shipped(name: str) -> Path:
    """Find a folder that is shipped with calib.

    Parameters
    ----------
    name : str
        Name of the folder: inside the package when calib is installed, at the
        top level of the checkout otherwise.

    Returns
    -------
    Path
        The folder.

    Raises
    ------
    CalibError
        If this installation lacks the folder.
    """
    package = Path(__file__).parent
    for folder in (package / name, package.parent / name):
        if folder.is_dir():
            return folder
    raise CalibError(f"this installation of calib lacks its folder {name!r}; install calib again")

"""CSV tables that are the same bytes on every run, and whole numbers written as decimals."""

import argparse
import csv
from pathlib import Path

__all__ = ["decimal_text", "output_folder", "write_table"]


def output_folder(description):
    """Folder to write into: the one named on the command line, else the one this script lies in.

    Parameters
    ----------
    description : str
        First line of the help text.

    Returns
    -------
    pathlib.Path
        A folder, not yet made.
    """
    parser = argparse.ArgumentParser(description=description)
    parser.add_argument("outdir", type=Path, metavar="OUTDIR", nargs="?", default=Path(__file__).parent)
    return parser.parse_args().outdir


def write_table(path, header, rows):
    """Write a comma-separated table with a header line.

    Parameters
    ----------
    path : pathlib.Path
        File to write; its folder is made.
    header : sequence of str
        Names of the columns.
    rows : iterable of sequences
        One a line; None becomes an empty cell.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(header)
        writer.writerows(rows)


def decimal_text(number, n_decimals):
    """Decimal text of a whole number of last digits, digit for digit.

    Parameters
    ----------
    number : int
        The value in units of its last digit.
    n_decimals : int
        Digits behind the point, at least 1.

    Returns
    -------
    str
        The decimal.

    Examples
    --------
    >>> decimal_text(-5, 2)
    '-0.05'
    """
    whole, rest = divmod(abs(int(number)), 10**n_decimals)
    return f"{'-' if number < 0 else ''}{whole}.{rest:0{n_decimals}d}"

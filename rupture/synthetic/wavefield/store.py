"""Green's functions kept on disk: built once, reused, safe among processes, limited in size."""

from __future__ import annotations

import hashlib
import os
import sys
from pathlib import Path

import numpy as np
from filelock import FileLock, Timeout
from numpy.typing import ArrayLike, NDArray

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.synthetic.wavefield.integration import Report
from rupture.synthetic.wavefield.sampling import FrequencyPlan
from rupture.synthetic.wavefield.tables import CODE_VERSION, GreensTable, checked_distances, greens

LOCKS = 64
"""Lock files are shared by keys, so that their number stays bounded."""


def default_folder() -> Path:
    """Return the user's cache folder for Green's functions (XDG base directories, or the platform's own place)."""
    if base := os.environ.get("XDG_CACHE_HOME"):
        root = Path(base)
    elif sys.platform == "darwin":
        root = Path.home() / "Library" / "Caches"
    elif sys.platform == "win32":
        root = Path(os.environ.get("LOCALAPPDATA", Path.home() / "AppData" / "Local"))
    else:
        root = Path.home() / ".cache"
    return root / "rupture-backtrack" / "greens"


def greens_key(model: LayeredModel, depth_km: float, distance_m: NDArray[np.float64], plan: FrequencyPlan) -> str:
    """Return the SHA-256 of everything that Green's functions depend on (not the model's name), as hexadecimal text."""
    digest = hashlib.sha256(f"version {CODE_VERSION}".encode())
    numbers = (
        model.top_km, model.vp_km_s, model.vs_km_s, model.density_kg_m3, model.qp, model.qs,
        [depth_km], distance_m, [plan.step_s, plan.samples, plan.high_hz],
    )  # fmt: skip
    for array in numbers:
        data = np.ascontiguousarray(array, dtype="<f8")
        digest.update(np.int64(data.size).tobytes() + data.tobytes())
    return digest.hexdigest()


class GreensStore:
    """A folder of HDF5 files, one for each set of Green's functions, named by what they depend on.

    A file is written beside its place under a name of its own and moved there when whole, so a killed process leaves
    no broken file; a lock lets one process build while others that want the same wait for it.

    Parameters
    ----------
    folder
        Where to keep them; the user's cache folder when not given.
    limit_bytes
        Size above which the files not used for longest are removed.

    Raises
    ------
    InputError
        When the folder cannot be made or written, or the limit is not positive.
    """

    def __init__(self, folder: Path | None = None, limit_bytes: int = 2_000_000_000) -> None:
        if limit_bytes <= 0:
            raise InputError(f"The store of Green's functions needs a positive size limit, not {limit_bytes}")
        self.folder = default_folder() if folder is None else Path(folder)
        self.limit_bytes = int(limit_bytes)
        try:
            (self.folder / "locks").mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise InputError(
                f"The store of Green's functions cannot be made in {self.folder}: {error.strerror}; "
                "set XDG_CACHE_HOME to a folder that can be written"
            ) from error

    def fetch(
        self,
        model: LayeredModel,
        source_depth_km: float,
        distance_m: ArrayLike,
        plan: FrequencyPlan,
        report: Report | None = None,
    ) -> GreensTable:
        """Return Green's functions from the store; build and keep them when they are not there.

        Parameters, errors as for `greens`; `report` is called only while building.
        """
        distance = checked_distances(distance_m)
        key = greens_key(model, source_depth_km, distance, plan)
        table = self._read(key, source_depth_km, distance, plan)
        if table is not None:
            return table
        with self._lock(key):
            table = self._read(key, source_depth_km, distance, plan)
            if table is None:
                table = greens(model, source_depth_km, distance, plan, report)
                self._write(key, table, model.name)
        self.evict(keep=key)
        return table

    def size_bytes(self) -> int:
        """Return how much the stored files take together."""
        return sum(size for _, size, _ in self._files())

    def evict(self, keep: str | None = None) -> None:
        """Remove files not used for longest until the limit is met, and what killed processes left behind.

        Parameters
        ----------
        keep
            Key of a file that stays, however large.
        """
        files = sorted(self._files())
        total = sum(size for _, size, _ in files)
        for _, size, path in files:
            if total <= self.limit_bytes:
                break
            if path.stem != keep:
                path.unlink(missing_ok=True)
                total -= size
        for part in self.folder.glob("*.part"):
            lock = self._lock(part.name.split(".")[0])
            try:
                # A part whose lock is free has lost its writer.
                with lock.acquire(timeout=0):
                    part.unlink(missing_ok=True)
            except Timeout:
                continue

    def _files(self) -> list[tuple[float, int, Path]]:
        found = []
        for path in self.folder.glob("*.h5"):
            try:
                status = path.stat()
            except FileNotFoundError:  # another process removed it just now
                continue
            found.append((status.st_mtime, status.st_size, path))
        return found

    def _lock(self, key: str) -> FileLock:
        return FileLock(self.folder / "locks" / f"{int(key[:8], 16) % LOCKS:02d}.lock")

    def _read(
        self, key: str, depth_km: float, distance_m: NDArray[np.float64], plan: FrequencyPlan
    ) -> GreensTable | None:
        import h5py

        path = self.folder / f"{key}.h5"
        try:
            with h5py.File(path, "r", locking=False) as file:
                spectra = file["spectra"][...]
            os.utime(path)
        except FileNotFoundError:
            return None
        except (OSError, KeyError):
            # Damaged from outside (a full disk, a copied folder): as good as not there.
            path.unlink(missing_ok=True)
            return None
        return GreensTable(float(depth_km), distance_m, plan, spectra)

    def _write(self, key: str, table: GreensTable, model_name: str) -> None:
        import h5py

        part = self.folder / f"{key}.{os.getpid()}.part"
        try:
            with h5py.File(part, "w", locking=False) as file:
                file.attrs["title"] = "Green's functions of a layered half-space, moment step of 1 N m"
                file.attrs["earth_model"] = model_name
                file.attrs["source_depth_km"] = table.depth_km
                file.attrs["step_s"] = table.plan.step_s
                file.attrs["samples"] = table.plan.samples
                file.attrs["high_hz"] = table.plan.high_hz
                file.attrs["code_version"] = CODE_VERSION
                file["distance_m"] = table.distance_m
                file["spectra"] = table.spectra
                file["spectra"].attrs["meaning"] = (
                    "distance, element, complex frequency; displacement (m s), rotation (rad s)"
                )
            part.replace(self.folder / f"{key}.h5")
        finally:
            part.unlink(missing_ok=True)

"""A store of certificates on disk, by the matrix of a block, for many processes at once.

    store = CertificateStore(folder)
    routing.solve(form, store=store)

What makes a matrix totally unimodular does not depend on sides, bounds or costs, so what was found
for one instance serves each later one that has a block with the same scaled matrix. An entry is
a file of JSON named by the digest of that matrix. Whatever is read is checked against the matrix
before it is believed; what fails is deleted, and told in the log. Files are written under another
name and then renamed, so nobody reads half of one. Those not used for longest are removed where all
together grow beyond the limit. A store that cannot be written, say on a full disk, only saves
nothing.
"""

from __future__ import annotations

import hashlib
import json
import logging
import os
import tempfile
import time
from collections import OrderedDict
from pathlib import Path

import numpy as np
import scipy.sparse as sp

from ..certificate_parts import Part, part_from_dict
from ..files import sentence
from ..integrality.verdicts import BECAUSE

SCHEMA = "latpath-store/1"
#: Bytes of all files together, unless told otherwise.
LIMIT = 2**30
#: Share of the limit that is left after files were removed.
LEFT = 0.9
#: Bytes of checked entries that a process holds in memory.
HELD = 2**26
#: Seconds of searching from which on a proof is worth a file: reading takes time as well.
WORTH_KEEPING = 0.01
#: Seconds after which a file half written is nobody's any more.
ABANDONED = 3600.0

log = logging.getLogger("pyomo_latpath.store")

#: The name of a structure, and the proof.
Proof = tuple[str, Part]


class CertificateStore:
    """Certificates kept in a folder.

    Parameters
    ----------
    folder : path
        Made with the first entry.
    limit : int
        Bytes that its files may take.

    Attributes
    ----------
    recalled : int
        How many proofs came from it so far.

    Raises
    ------
    ValueError
        Where the path is that of a file.

    Examples
    --------
    >>> import tempfile
    >>> from pyomo_latpath.integrality.recognise import prove_tu
    >>> matrix = sp.csc_array([[1, 1, 0], [0, 1, 1], [1, 1, 1]])
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     CertificateStore(folder).keep(matrix, prove_tu(matrix), seconds=1.0)
    ...     name, part = CertificateStore(folder).recall(matrix)
    >>> name, part.kind
    ('conetwork', 'conetwork')
    """

    def __init__(self, folder: str | os.PathLike[str], limit: int = LIMIT) -> None:
        self.folder, self.limit = Path(folder), limit
        if self.folder.exists() and not self.folder.is_dir():
            raise ValueError(f"{self.folder} is a file; a store of certificates is a folder")
        self.recalled = 0
        self._held: OrderedDict[str, tuple[Proof, int]] = OrderedDict()
        self._held_bytes = 0
        self._bytes: int | None = None  # of all files, as far as this process knows
        self._told = False

    def recall(self, matrix: sp.csc_array) -> Proof | None:
        """Return the proof that a matrix is totally (or, for its slacks, just) unimodular.

        Parameters
        ----------
        matrix : scipy.sparse.csc_array, shape (m, n), int64

        Returns
        -------
        (str, Part) or None
            Checked against this very matrix; a part of the kind 'unimodular' must still be held
            against the sides.
        """
        key = key_of(matrix)
        proof = self._held[key][0] if key in self._held else self._read(key, matrix)
        if proof is not None:
            self._touch(key)
            self.recalled += 1
        return proof

    def keep(self, matrix: sp.csc_array, proof: Proof, seconds: float) -> None:
        """Keep a proof, if it took long enough to find.

        Parameters
        ----------
        matrix : scipy.sparse.csc_array, shape (m, n), int64
        proof : (str, Part)
            Name of the structure, and the proof.
        seconds : float
            What finding it took.
        """
        if seconds < WORTH_KEEPING:
            return
        name, part = proof
        text = json.dumps({"schema": SCHEMA, "structure": name, "part": part.to_dict()})
        key, content = key_of(matrix), text.encode()
        self._hold(key, proof, len(content))
        if len(content) > LEFT * self.limit:
            return
        try:
            self._write(key, content)
            self._make_room(len(content))
        except OSError as error:
            if not self._told:
                log.warning("the store %s keeps nothing more: %s", self.folder, sentence(error))
            self._told = True

    def _read(self, key: str, matrix: sp.csc_array) -> Proof | None:
        path = self._path(key)
        try:
            content = path.read_bytes()
        except FileNotFoundError:
            return None
        except OSError as error:
            log.warning("a certificate cannot be read: %s", sentence(error))
            return None
        try:
            name, part = _proof_of(content)
            part.check(matrix)
        except (ValueError, TypeError, LookupError, ArithmeticError, RecursionError) as error:
            log.warning("the certificate %s does not hold and is thrown away: %s", path, error)
            _remove(path)
            return None
        self._hold(key, (name, part), len(content))
        return name, part

    def _write(self, key: str, content: bytes) -> None:
        path = self._path(key)
        path.parent.mkdir(parents=True, exist_ok=True)
        number, half = tempfile.mkstemp(dir=path.parent, prefix=".", suffix=".half")
        try:
            with os.fdopen(number, "wb") as file:
                file.write(content)
            os.replace(half, path)
        except BaseException:
            _remove(Path(half))
            raise

    def _make_room(self, added: int) -> None:
        """Remove the files not used for longest where all together are too large."""
        if self._bytes is not None and self._bytes + added <= self.limit:
            self._bytes += added
            return
        files = sorted(self._files())
        self._bytes = sum(size for _, size, _ in files)
        most = self.limit if self._bytes <= self.limit else LEFT * self.limit
        for _, size, path in files:
            if self._bytes <= most:
                break
            _remove(path)
            self._bytes -= size

    def _files(self) -> list[tuple[float, int, Path]]:
        """Time of last use, size and path of each entry; what was left half written is removed."""
        found = []
        for path in self.folder.glob("*/*"):
            try:
                facts = path.stat()
            except FileNotFoundError:  # another process was faster
                continue
            if path.suffix == ".half":
                if facts.st_mtime < time.time() - ABANDONED:
                    _remove(path)
            else:
                found.append((facts.st_mtime, facts.st_size, path))
        return found

    def _hold(self, key: str, proof: Proof, size: int) -> None:
        """Hold a checked proof in memory, in place of those not used for longest."""
        if key in self._held:
            self._held_bytes -= self._held.pop(key)[1]
        self._held[key] = proof, size
        self._held_bytes += size
        while self._held_bytes > HELD and len(self._held) > 1:
            self._held_bytes -= self._held.popitem(last=False)[1][1]

    def _touch(self, key: str) -> None:
        """Note the use, in memory and (for those who remove) in the file's time."""
        self._held.move_to_end(key)
        try:
            os.utime(self._path(key))
        except OSError:  # removed meanwhile, or not ours to write: it is used all the same
            log.debug("the use of %s could not be noted", key)

    def _path(self, key: str) -> Path:
        return self.folder / key[:2] / f"{key}.json"


def key_of(matrix: sp.csc_array) -> str:
    """Digest of a matrix of whole numbers."""
    digest = hashlib.sha256(f"{SCHEMA} {matrix.shape}".encode())
    for numbers in (matrix.indptr, matrix.indices, matrix.data):
        digest.update(np.ascontiguousarray(numbers, dtype="<i8").tobytes())
    return digest.hexdigest()


def _proof_of(content: bytes) -> Proof:
    """Read an entry.

    Raises
    ------
    ValueError, TypeError, LookupError, RecursionError
        For anything that `CertificateStore.keep` would not have written.
    """
    data = json.loads(content)
    if not isinstance(data, dict) or data.get("schema") != SCHEMA:
        raise ValueError(f"the schema is not {SCHEMA!r}")
    if data.get("structure") not in BECAUSE or not isinstance(data.get("part"), dict):
        raise ValueError("it names no structure or has no proof")
    return data["structure"], part_from_dict(data["part"])


def _remove(path: Path) -> None:
    """Remove a file; another process may have done so."""
    try:
        path.unlink(missing_ok=True)
    except OSError as error:
        log.warning("a file cannot be removed: %s", sentence(error))

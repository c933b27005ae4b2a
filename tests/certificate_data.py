"""Certificates as data: whether the checker accepts them, and what else could be written there."""

from __future__ import annotations

import copy
import json

import numpy as np
import scipy.sparse as sp

from pyomo_latpath.certificates import (
    KINDS,
    BlockCertificate,
    Certificate,
    CertificateError,
    Network,
    Unimodular,
    check_certificate,
)

#: The system x = b, and the matrix without rows and columns.
ONE_ROW = Unimodular(np.empty((0, 3), np.int64), Network(np.array([[0, 1]]), np.array([[0, 1]])))
NOTHING = Network(np.empty((0, 2), np.int64), np.empty((0, 2), np.int64))


def accepts(form_or_matrix, certificate) -> bool:
    """Whether the checker accepts, by way of JSON."""
    try:
        data = certificate if isinstance(certificate, dict) else certificate.to_dict()
        check_certificate(form_or_matrix, Certificate.from_dict(json.loads(json.dumps(data))))
    except CertificateError:
        return False
    return True


def accepts_part(matrix, data) -> bool:
    """Whether a part, as data, proves a matrix."""
    try:
        KINDS[data["kind"]].from_dict(data).check(sp.csc_array(np.array(matrix)))
    except CertificateError:
        return False
    return True


def whole(part, matrix) -> Certificate:
    """One block over all of a matrix, factors 1."""
    m, n = np.asarray(matrix).shape
    ones = ("1",) * m, ("1",) * n
    return Certificate("", (BlockCertificate(np.arange(m), np.arange(n), *ones, part),))


def leaves(data, path=()):
    """Paths to all numbers in JSON data."""
    if isinstance(data, dict):
        for key, value in data.items():
            yield from leaves(value, (*path, key))
    elif isinstance(data, list):
        for k, value in enumerate(data):
            yield from leaves(value, (*path, k))
    elif type(data) is int:
        yield path


def change(data, path, value):
    """The same data with another number at the path."""
    data = copy.deepcopy(data)
    place = data
    for key in path[:-1]:
        place = place[key]
    place[path[-1]] = value
    return data

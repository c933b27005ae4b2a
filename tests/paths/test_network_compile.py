"""Compiled kernels: nothing at import, code kept on disk, and installs that cannot be written.

Every case runs in a process of its own, on a copy of the kernels alone.
"""

import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from pyomo_latpath.paths import network_compile

SOURCES = ("network_compile.py", "network_forest.py", "network_kernel.py")
SCRIPT = """
import numpy as np
from kernels import network_compile
from kernels.network_kernel import Tree
ready = network_compile.compiled_before()
links = np.zeros((5, 3), np.int32)
links[0] = 2, 2, -1
tree = Tree(*links, *np.zeros((3, 3)).astype(np.int64))
hung, sequence = np.zeros(3, np.int32), np.zeros(3, np.int32)
links[2] = 1, 2, 0
count = network_compile.compiled().label(tree, hung, sequence)
stats = network_compile.compiled().label.stats
print(count, sequence.tolist(), sum(stats.cache_hits.values()), ready)
"""


@pytest.fixture
def install(tmp_path):
    """A package of the kernels whose folder takes no cache."""
    folder = tmp_path / "site" / "kernels"
    folder.mkdir(parents=True)
    (folder / "__init__.py").touch()
    for name in SOURCES:
        shutil.copy(Path(network_compile.__file__).parent / name, folder)
    # A file in the place of the cache folder stops even a user who may write anywhere.
    (folder / "__pycache__").touch()
    return folder


def run(install, script=SCRIPT, **places):
    """Run a script with its cache folders in these places."""
    kept = {
        name: value
        for name, value in os.environ.items()
        if name not in ("NUMBA_CACHE_DIR", "XDG_CACHE_HOME", "HOME", "NUMBA_DISABLE_JIT")
    }
    done = subprocess.run(
        [sys.executable, "-c", script],
        env=kept | {"PYTHONPATH": str(install.parent), "PYTHONDONTWRITEBYTECODE": "1"} | places,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return done.stdout.split("\n")[0]


def test_importing_compiles_nothing(install):
    script = (
        "import sys\n"
        "from kernels import network_compile\n"
        "network_compile.plain()\n"
        "print('numba' in sys.modules)"
    )
    assert run(install, script) == "False"


def test_a_read_only_install_keeps_its_code_with_the_user(install, tmp_path):
    pytest.importorskip("numba")
    home = tmp_path / "home"
    places = {"HOME": str(home), "XDG_CACHE_HOME": str(home / "cache")}
    assert run(install, **places) == "2 [0, 1, 2] 0 False"
    assert list(home.rglob("network_forest.label-*.nbi"))
    assert run(install, **places) == "2 [0, 1, 2] 1 False"


def test_a_named_folder_keeps_the_code(install, tmp_path):
    pytest.importorskip("numba")
    named = tmp_path / "named"
    places = {"HOME": "/dev/null/home", "NUMBA_CACHE_DIR": str(named)}
    assert run(install, **places) == "2 [0, 1, 2] 0 False"
    [place] = {file.parent for file in named.rglob("network_forest.label-*.nbi")}
    (place / "network_kernel.walk-56.py.nbi").touch()
    assert run(install, **places) == "2 [0, 1, 2] 1 True"


def test_no_folder_at_all_still_compiles(install):
    pytest.importorskip("numba")
    places = {"HOME": "/dev/null/home", "XDG_CACHE_HOME": "/dev/null/cache"}
    assert run(install, **places) == "2 [0, 1, 2] 0 False"


def test_plain_kernels_write_back_into_arrays():
    import numpy as np

    links = np.zeros((5, 3), np.int32)
    links[0] = 2, 2, -1
    links[2] = 1, 2, 0
    tree = network_compile.network_kernel.Tree(*links, *np.zeros((3, 3), np.int64))
    hung, sequence = np.zeros(3, np.int32), np.zeros(3, np.int32)
    assert network_compile.plain().label(tree, hung, sequence) == 2
    assert sequence.tolist() == [0, 1, 2]
    assert hung[:2].tolist() == [0, 1]

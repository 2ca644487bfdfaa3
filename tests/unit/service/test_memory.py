"""Freed memory is kept until it is given back: seen by the pages that the kernel has to map anew."""

import subprocess
import sys

import pytest

BLOCKS = """
import resource
import numpy as np
from service.memory import keep_freed
if {keep}:
    keep_freed()
for k in range(6):
    before = resource.getrusage(resource.RUSAGE_SELF).ru_minflt
    np.ones(8_000_000)
print(resource.getrusage(resource.RUSAGE_SELF).ru_minflt - before)
"""


def faults(keep):
    script = BLOCKS.format(keep=keep)
    return int(subprocess.run([sys.executable, "-c", script], capture_output=True, check=True, text=True).stdout)


@pytest.mark.skipif(sys.platform != "linux", reason="of the GNU C library")
def test_a_block_that_was_freed_is_used_again_without_new_pages():
    assert faults(True) < 0.1 * faults(False)


@pytest.mark.skipif(sys.platform != "linux", reason="of the GNU C library")
def test_what_is_free_is_given_back():
    script = """
import resource
import numpy as np
from service.memory import give_back, keep_freed
def resident():
    with open("/proc/self/statm") as file:
        return int(file.read().split()[1]) * resource.getpagesize() / 2**20
keep_freed()
block = np.ones(8_000_000)
del block
kept = resident()
give_back()
print(kept - resident())
"""
    freed = subprocess.run([sys.executable, "-c", script], capture_output=True, check=True, text=True).stdout
    assert float(freed) > 50

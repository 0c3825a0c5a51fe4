"""The package as a whole: what it exports, and the instruction set it runs on."""

import os
import subprocess
import sys

import pytest

import perpend


def test_every_exported_name_exists_and_is_documented():
    for name in perpend.__all__:
        assert hasattr(perpend, name)


def test_the_kernel_path_is_the_forced_one():
    forced = os.environ.get("PERPEND_KERNEL")
    assert perpend.kernel_path() == forced if forced else perpend.kernel_path()


def test_an_unknown_kernel_path_is_refused_on_import_with_the_names_that_exist():
    environment = {**os.environ, "PERPEND_KERNEL": "steam"}
    outcome = subprocess.run(
        [sys.executable, "-c", "import perpend"], env=environment, capture_output=True, text=True, check=False
    )
    assert outcome.returncode == 1
    assert "PERPEND_KERNEL: expected" in outcome.stderr
    assert "portable, got steam" in outcome.stderr.replace(" or portable", " portable")


@pytest.mark.parametrize("owner", [perpend.Basis, perpend.Reading, perpend.Step, perpend.Tracker, perpend.Watch])
def test_help_shows_what_the_stub_documents(owner):
    assert len(owner.__doc__) > 60
    for name, member in vars(owner).items():
        # The attributes of a step are listed in the documentation of its class.
        if not name.startswith("_") and owner is not perpend.Step:
            assert member.__doc__, f"{owner.__name__}.{name}"

"""What `import spheru` offers, and what it costs."""

from __future__ import annotations

import inspect
import subprocess
import sys

import pytest

import spheru
from spheru import errors

PUBLIC = {
    "Births", "Conversion", "Estimate", "Fault", "Frame", "LabelImage", "LabelStore",
    "MaterialRecord", "MeasuredField", "Measurement", "Result", "Settings", "Sizes",
    "Statistic", "__version__", "estimate", "grow", "measure_images", "measure_sizes",
    "read_labels", "read_record", "read_settings", "record_names", "save_measurement",
    "save_run", "settings_from_mapping", "settings_schema", "store_run", "tessellate",
    "write_labels",
}  # fmt: skip
ERRORS = {
    name
    for name, value in vars(errors).items()
    if inspect.isclass(value) and issubclass(value, errors.SpheruError)
}


def test_the_public_names_are_these():
    assert set(spheru.__all__) == PUBLIC | ERRORS


@pytest.mark.parametrize("name", sorted(PUBLIC | ERRORS))
def test_every_public_name_is_there_and_says_what_it_is(name):
    value = getattr(spheru, name)
    assert name == "__version__" or inspect.getdoc(value)


def test_an_unknown_name_is_refused():
    with pytest.raises(AttributeError, match="no attribute 'grwo'"):
        _ = spheru.grwo


def test_importing_the_package_imports_nothing_heavy():
    heavy = "{'numpy', 'numba', 'scipy'} & set(sys.modules)"
    code = f"import sys, spheru; sys.exit(','.join({heavy}) or 0)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


@pytest.mark.parametrize("name", sorted(ERRORS - {"SpheruError", "InputFault", "RunError"}))
def test_every_fault_of_the_input_is_also_the_builtin_that_a_caller_expects(name):
    leaf = getattr(errors, name)
    assert issubclass(leaf, errors.InputFault)
    assert issubclass(leaf, ValueError | LookupError | MemoryError | OSError | ImportError)

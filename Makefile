# Every target works on a machine that has only Python >= 3.11 and make.
PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin
# one thread a process: spinning threads make fits many times slower on a busy machine
export OMP_NUM_THREADS = 1
export OPENBLAS_NUM_THREADS = 1
export NUMBA_NUM_THREADS = 1

.PHONY: demo test check format bench model pictures clean

demo: $(VENV)/run.stamp
	$(BIN)/pdclass demo --out port-ferrow-demo --force

test: $(VENV)/dev.stamp
	$(BIN)/python -m pytest

check: $(VENV)/dev.stamp
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy

format: $(VENV)/dev.stamp
	$(BIN)/ruff format .
	$(BIN)/ruff check --fix .

bench: $(VENV)/dev.stamp
	$(BIN)/python benchmarks/results.py

model: $(VENV)/dev.stamp
	$(BIN)/python -m pdclass.jobs.base_model models/base

pictures: $(VENV)/dev.stamp
	$(BIN)/python -m pdclass.jobs.pictures synthetic/pictures
	$(BIN)/python -m pdclass.jobs.feature_pages docs

$(VENV)/run.stamp: pyproject.toml constraints.txt
	test -x $(BIN)/python || $(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install -q --disable-pip-version-check -c constraints.txt -e .
	touch $@

$(VENV)/dev.stamp: pyproject.toml constraints.txt
	test -x $(BIN)/python || $(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install -q --disable-pip-version-check -c constraints.txt -e ".[dev]"
	touch $@

clean:
	rm -rf $(VENV) build dist port-ferrow-demo .pytest_cache .mypy_cache .ruff_cache
	find . -name __pycache__ -type d -prune -exec rm -rf {} +

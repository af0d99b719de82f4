# Two words do the work: `make demo` and `make test`. Both set up everything they need in .venv.
PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin
PIP := $(BIN)/python -m pip --disable-pip-version-check
WORKERS ?= 2
# One thread per process: the work is shared out over processes, and results must not depend on it.
export OMP_NUM_THREADS ?= 1
export OPENBLAS_NUM_THREADS ?= 1

.PHONY: help demo test check format calibrate bench bench-large fuzz lock clean

help: ## list the words
	@grep -hE '^[a-z-]+:.*##' $(MAKEFILE_LIST) | sed 's/:[^#]*## /\t/' | expand -t 12

$(VENV)/pyvenv.cfg:
	$(PYTHON) -c 'import sys; sys.exit("stillbench needs Python 3.11 or later; name one with make PYTHON=python3.12") if sys.version_info < (3, 11) else None'
	$(PYTHON) -m venv $(VENV)

$(VENV)/run.done: requirements/run.txt pyproject.toml | $(VENV)/pyvenv.cfg
	$(PIP) install --quiet --require-hashes -r requirements/run.txt
	$(PIP) install --quiet --no-deps --no-build-isolation --editable .
	$(BIN)/python -m compileall -q src
	touch $@

$(VENV)/dev.done: requirements/dev.txt $(VENV)/run.done
	$(PIP) install --quiet --require-hashes -r requirements/dev.txt
	touch $@

demo: $(VENV)/run.done ## make two night logs, qualify both, write reports/demo
	$(BIN)/stillbench demo --out reports/demo

test: $(VENV)/dev.done ## run every test
	$(BIN)/python -m pytest -n $(WORKERS)

check: $(VENV)/dev.done ## format, lint, types, who imports whom
	$(BIN)/ruff format --check .
	$(BIN)/ruff check .
	$(BIN)/mypy
	$(BIN)/lint-imports

format: $(VENV)/dev.done ## let ruff rewrite the layout
	$(BIN)/ruff format .
	$(BIN)/ruff check --fix .

calibrate: $(VENV)/dev.done ## made logs of known noise against the claims, half an hour; resumable; writes reference/calibration.md
	$(BIN)/python bench/calibrate.py --workers $(WORKERS)

bench: $(VENV)/dev.done ## speed and memory as ratios, minutes; writes bench/results.md
	$(BIN)/python bench/bench.py

bench-large: $(VENV)/dev.done ## time and memory up to a thousand million samples, half an hour and 30 GB of disk; writes bench/large.md
	$(BIN)/python bench/bench_large.py

FUZZ_SECONDS ?= 60
fuzz: $(VENV)/dev.done ## odd inputs for each reader, guided by coverage (FUZZ_SECONDS for each); the corpus stays in tests/fuzz/corpus
	$(PIP) install --quiet 'atheris>=2.3'
	for target in text npy columnar wav mat packed sheet units; do \
	  $(BIN)/python tests/fuzz/fuzz_readers.py $$target $(FUZZ_SECONDS) || exit 1; done

lock: ## pin the requirements again (needs uv)
	for set in "run:--group pyproject.toml:build" "dev:--group pyproject.toml:build --group pyproject.toml:dev"; do \
	  uv pip compile --quiet --upgrade --universal --python-version 3.11 --generate-hashes --no-annotate --no-header \
	    pyproject.toml $${set#*:} -o requirements/$${set%%:*}.txt || exit 1; done

clean: ## remove the environment and caches
	rm -rf $(VENV) .mypy_cache .ruff_cache .pytest_cache dist

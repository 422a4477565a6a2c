# make demo       the main job on an invented town: lines, picture, page in build/demo/   (SEED=n for another town)
# make test       everything that must hold: lint, types, import boundaries, tests
# make bench      what the model is worth on held-out scenes and real sets: build/bench/index.html
# make test-long  the minutes-long checks
PYTHON ?= python3
SEED ?= 7
VENV := .venv
BIN := $(VENV)/bin
SUDO := $(shell [ "$$(id -u)" = 0 ] || echo sudo)

.PHONY: demo test test-long bench lint clean

demo: $(VENV)/.runtime
	$(BIN)/python tools/demo.py --seed $(SEED) --out build/demo

test: lint
	$(BIN)/python -m pytest -n 2 -m "not long"

test-long: $(VENV)/.dev
	$(BIN)/python -m pytest -m long

bench: $(VENV)/.dev
	$(BIN)/python -m roadhem_training.bench --model model/roadhem/shelf --out build/bench

lint: $(VENV)/.dev
	$(BIN)/ruff check model training tests tools
	$(BIN)/mypy
	$(BIN)/lint-imports

$(VENV)/.runtime: pyproject.toml
	$(PYTHON) -c "import ensurepip, venv" 2>/dev/null || \
	  { $(SUDO) apt-get update && $(SUDO) apt-get install -y --no-install-recommends python3-venv; }
	[ -x $(BIN)/python ] || $(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --editable .
	touch $@

$(VENV)/.dev: $(VENV)/.runtime
	$(BIN)/python -m pip install --quiet --editable ".[dev,learn]"
	touch $@

clean:
	rm -rf build $(VENV)

# The commands of this project. `make demo` and `make test` need python3 (3.11 or newer) and a package registry, nothing else.
PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin
# Never fetch another Python; take the one that is here.
export UV_PYTHON_DOWNLOADS := never
# Services and tests take modules from the project alone, never from the folder they happen to run in.
RUN := $(BIN)/python -P

.PHONY: help install demo test slow lint bench lock clean

help:
	@echo "make demo    an invented hatchery, live in the browser"
	@echo "make test    every test that this machine can run"
	@echo "make slow    the long tests"
	@echo "make lint    style, strict types, import contracts"
	@echo "make bench   measured speed, as ratios within one run"
	@echo "make lock    pin the dependencies anew"

install: $(VENV)/.installed

$(VENV)/.installed: requirements.lock pyproject.toml
	$(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet uv
	$(BIN)/uv pip install --quiet --python $(BIN)/python --require-hashes -r requirements.lock
	$(BIN)/uv pip install --quiet --python $(BIN)/python --no-deps -e .
	@touch $@

demo: install
	@exec $(RUN) -m dashboard.terminal.command demo

test: install
	$(RUN) -m pytest -m "not slow" -q

slow: install
	$(RUN) -m pytest -m slow -q

lint: install
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

bench: install
	$(RUN) -m tests.bench

lock:
	$(BIN)/uv pip compile --quiet --universal --python-version 3.11 --all-extras --generate-hashes --no-emit-index-url --no-header \
		pyproject.toml -o requirements.lock

clean:
	rm -rf $(VENV) build dist artefacts demo_run .pytest_cache .mypy_cache .ruff_cache .hypothesis .import_linter_cache

# Leafturn: every target below is a promise to whoever has just cloned this.
SHELL := /bin/bash
PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin
STAMP := $(VENV)/.installed
TEST_STAMP := $(VENV)/.installed-for-tests
PIP := $(BIN)/python -m pip --quiet --disable-pip-version-check install
ONLY ?=
LOCKING := --quiet --upgrade --universal --python-version 3.11 --generate-hashes --no-emit-index-url --no-header --no-annotate

.DEFAULT_GOAL := help
.PHONY: help setup demo test lint bench lock clean

help: ## list the targets
	@grep -hE '^[a-z]+:.*## ' $(MAKEFILE_LIST) | sed -E 's/^([a-z]+):.*## /  make \1\t/' | expand -t 18

setup: $(STAMP) ## make the virtual environment from the locked, hashed list

$(STAMP): requirements.lock pyproject.toml
	@$(PYTHON) -c 'import sys; sys.exit(sys.version_info < (3, 11))' || { echo "Leafturn needs Python 3.11 or newer; $(PYTHON) is older. Name another with: make setup PYTHON=python3.12"; exit 1; }
	@$(PYTHON) -c 'import venv, ensurepip' 2>/dev/null || { if [ "$$(id -u)" = 0 ] && command -v apt-get >/dev/null; then apt-get update -qq && apt-get install -y -qq python3-venv; else echo "Python's venv module is missing. Install Debian's package python3-venv, then run this again."; exit 1; fi; }
	$(PYTHON) -m venv $(VENV)
	$(PIP) --require-hashes -r requirements.lock
	$(PIP) --no-deps --no-build-isolation -e .
	@touch $@

$(TEST_STAMP): $(STAMP) requirements-test.lock
	$(PIP) --require-hashes -r requirements-test.lock
	@touch $@

demo: $(STAMP) ## run the main job on an invented district network; look at var/demo/index.html
	$(BIN)/leafturn demo

test: $(TEST_STAMP) ## all checks and tests (installs what they need when root)
	$(BIN)/python -m tests.run

lint: $(TEST_STAMP) ## style, types and the import contracts
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

bench: $(TEST_STAMP) ## measure ours beside its anchor, one JSON line a row (ONLY=name for one)
	$(BIN)/python -m tests.bench $(ONLY)

lock: $(TEST_STAMP) ## work the locked lists out anew from pyproject.toml
	$(PIP) uv
	$(BIN)/uv pip compile $(LOCKING) pyproject.toml --extra build -o requirements.lock
	$(BIN)/uv pip compile $(LOCKING) pyproject.toml --extra build --extra test -c requirements.lock -o requirements-test.lock

clean: ## remove what the targets above made
	rm -rf $(VENV) var dist

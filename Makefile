# Everything runs in an environment of its own, .venv, made on first use.
PYTHON ?= python3
BIN := .venv/bin
STUDY ?= studies/harbour_approach.toml

.PHONY: study test lint bench pictures clean

study: .venv/run-ready
	$(BIN)/trackassay run $(STUDY)

test: .venv/test-ready
	$(BIN)/python -m pytest

lint: .venv/lint-ready
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

bench: .venv/test-ready
	$(BIN)/python tests/benchmarks/bench.py

# The README's pictures, from the studies that ship.
pictures: .venv/run-ready
	$(BIN)/trackassay run studies/harbour_approach.toml
	$(BIN)/trackassay run studies/dense_clutter.toml
	mkdir -p studies/pictures
	cp results/harbour_approach/figures/track_loss_over_clutter_density.svg results/harbour_approach/figures/over_time.svg studies/pictures/
	cp results/dense_clutter/figures/track_loss_over_clutter_density.svg studies/pictures/dense_track_loss.svg

clean:
	rm -rf .venv build *.egg-info

.venv/bin/python:
	$(PYTHON) -c 'import sys; sys.exit("trackassay needs Python 3.11 or newer: make PYTHON=python3.12 ...") if sys.version_info < (3, 11) else 0'
	$(PYTHON) -m venv .venv
	$(BIN)/python -m pip install --quiet --upgrade pip

.venv/run-ready: .venv/bin/python pyproject.toml constraints.txt
	$(BIN)/python -m pip install --quiet --constraint constraints.txt --editable .
	touch $@

.venv/test-ready: .venv/bin/python pyproject.toml constraints.txt
	$(BIN)/python -m pip install --quiet --constraint constraints.txt --editable ".[test]"
	touch $@ .venv/run-ready

.venv/lint-ready: .venv/bin/python pyproject.toml constraints.txt
	$(BIN)/python -m pip install --quiet --constraint constraints.txt --editable ".[test,lint]"
	touch $@ .venv/run-ready .venv/test-ready

# Everything runs in an environment of its own, .venv, made on first use.
PYTHON ?= python3
BIN := .venv/bin
STUDY ?= studies/harbour_approach.toml
# Studies of the README, by the figure that makes their point.
SHOWN_BY_LOSS := dense_clutter coastal_threshold blind_zone turning_target wrong_clutter_density persistent_clutter
SHOWN_OVER_TIME := bearings_only
SHOWN := $(SHOWN_BY_LOSS) $(SHOWN_OVER_TIME) mixture_sizes

.PHONY: study test lint bench pictures clean

study: .venv/run-ready
	$(BIN)/trackassay run $(STUDY)

test: .venv/test-ready
	$(BIN)/python -m pytest --numprocesses auto --dist loadfile

lint: .venv/lint-ready
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/mypy
	$(BIN)/lint-imports

bench: .venv/test-ready
	$(BIN)/python tests/benchmarks/bench.py

# The README's pictures, from the studies that ship.
pictures: .venv/run-ready
	mkdir -p studies/pictures
	for study in harbour_approach $(SHOWN); do $(BIN)/trackassay run studies/$$study.toml || exit 1; done
	cp results/harbour_approach/figures/track_loss_over_clutter_density.svg results/harbour_approach/figures/over_time.svg studies/pictures/
	for study in $(SHOWN_BY_LOSS); do cp results/$$study/figures/track_loss_over_*.svg studies/pictures/$$study.svg || exit 1; done
	cp results/mixture_sizes/figures/posterior_gap_squared_error_over_*.svg studies/pictures/mixture_sizes.svg
	for study in $(SHOWN_OVER_TIME); do cp results/$$study/figures/over_time.svg studies/pictures/$$study.svg || exit 1; done

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

# The one list of commands. CI calls these targets and nothing else; `make help` lists them.
SHELL := /bin/bash
.SHELLFLAGS := -eu -o pipefail -c
PYTHON ?= python3
VENV ?= .venv
RUN := $(VENV)/bin/python
PYTHONS ?= python3
SECONDS_EACH ?= 75

.PHONY: help demo test test-python test-rust lint format develop bench honesty wheels fuzz

help: ## what there is
	@grep -hE '^[a-z-]+:.*##' $(MAKEFILE_LIST) | sed -E 's/:.*##/:/'

$(VENV)/bin/pip:
	$(PYTHON) -m venv $(VENV)
	$(RUN) -m pip install --quiet --upgrade pip

demo: $(VENV)/bin/pip ## install and run the main job on the embedded demo data
	$(RUN) -m pip install --quiet ".[plot]"
	$(RUN) -m steelyard

test: test-rust test-python ## install and pass all tests

test-python: $(VENV)/bin/pip
	$(RUN) -m pip install --quiet --group test ".[all]"
	$(RUN) -m pytest -q tests
	$(RUN) -m pytest -q --pyargs steelyard --doctest-modules

test-rust:
	cargo test --quiet --no-default-features
	cargo test --quiet
	cargo bench --quiet --no-run --no-default-features

lint: $(VENV)/bin/pip ## rustfmt, clippy, ruff, mypy, stubtest, workflow files
	$(RUN) -m pip install --quiet --group lint --group test ".[all]"
	cargo fmt --all --check
	cargo clippy --quiet --all-targets -- -D warnings
	cargo clippy --quiet --all-targets --no-default-features -- -D warnings
	cargo fmt --manifest-path fuzz/Cargo.toml --check
	cargo clippy --quiet --manifest-path fuzz/Cargo.toml --no-default-features -- -D warnings
	$(RUN) -m ruff check .
	$(RUN) -m ruff format --check .
	$(RUN) -m mypy
	$(RUN) -m mypy.stubtest steelyard._core
	$(RUN) -m check_jsonschema --quiet --builtin-schema vendor.github-workflows .github/workflows/*.yml
	$(VENV)/bin/zizmor --offline --quiet .github/workflows

format: $(VENV)/bin/pip ## rewrite the sources in the house format
	$(RUN) -m pip install --quiet --group lint
	cargo fmt --all
	$(RUN) -m ruff check --fix --quiet . || true
	$(RUN) -m ruff format .

develop: $(VENV)/bin/pip ## editable install for daily work
	$(RUN) -m pip install --quiet "maturin>=1.9.4,<2" --group lint --group test
	$(VENV)/bin/maturin develop --release --extras all

bench: $(VENV)/bin/pip ## speed and memory against plain NumPy/SciPy scripts, verified in the same run
	$(RUN) -m pip install --quiet --group test ".[all]"
	env -u OPENBLAS_CORETYPE -u OPENBLAS_L2_SIZE $(RUN) benches/run.py

honesty: $(VENV)/bin/pip ## do error intervals and verdicts hold: a battery of problems with known answers
	$(RUN) -m pip install --quiet --group test ".[all]"
	mkdir -p target
	$(RUN) benches/honesty/run.py --picture target/honesty.png
	$(RUN) benches/honesty/base_checks.py

wheels: ## build sdist and wheel, look through both, test the wheel under each of PYTHONS
	$(PYTHON) .ci/wheels $(PYTHONS)

fuzz: $(VENV)/bin/pip ## a million calls of the public API, then every kernel target for SECONDS_EACH
	$(RUN) -m pip install --quiet --group test ".[all]"
	STEELYARD_FUZZ_CALLS=1000000 $(RUN) -m pytest -q tests/fuzz
	fuzz/run $(SECONDS_EACH)

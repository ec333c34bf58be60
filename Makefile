# The commands a contributor needs: make demo, make test, make check, make bench.

PYTHON ?= python3
VENV := .venv
BIN := $(VENV)/bin
DEMO_DIR ?= demo_run
RUST_SOURCES := $(shell find rust -name '*.rs') Cargo.toml Cargo.lock rust/core/Cargo.toml rust/python/Cargo.toml
INSTALLED := $(VENV)/installed.stamp
BUILT := $(VENV)/built.stamp

.PHONY: demo test check lint types bench clean

demo: $(BUILT)
	$(BIN)/rayloom demo $(DEMO_DIR)

test: $(BUILT)
	cargo test --release --workspace --exclude rayloom-python --quiet
	$(BIN)/python -m pytest -n auto --dist loadfile

check: lint types test

lint: $(BUILT)
	cargo fmt --all --check
	cargo clippy --release --workspace --all-targets -- -D warnings
	$(BIN)/ruff check .
	$(BIN)/ruff format --check .
	$(BIN)/lint-imports

types: $(BUILT)
	$(BIN)/mypy
	$(BIN)/python -m mypy.stubtest rayloom._core

bench: $(BUILT)
	$(BIN)/python -m bench

clean:
	rm -rf target $(VENV) $(DEMO_DIR)

# Both stamps live in the environment, so a deleted environment is rebuilt whole.
$(INSTALLED): pyproject.toml
	test -x $(BIN)/python || $(PYTHON) -m venv $(VENV)
	$(BIN)/python -m pip install --quiet --upgrade pip maturin
	$(BIN)/maturin develop --release --extras dev --quiet
	touch $@

$(BUILT): $(INSTALLED) $(RUST_SOURCES)
	$(BIN)/maturin develop --release --quiet --skip-install
	touch $@

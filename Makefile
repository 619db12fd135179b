# The tasks of this house. `make run` and `make test` are the README's two commands.
# Extra words for a task: make run ARGS="--history 2h", make test ARGS="-k windows".

BIN := .venv/bin
ARGS ?=

.PHONY: help run test lint bench coverage soak lock clean tools

help:
	@echo "make run     the main job on a simulated detector"
	@echo "make test    lint, types, import contracts and the tests"
	@echo "make lint    the first three alone"
	@echo "make bench   measures, each beside what it is compared with"
	@echo "make coverage  10,000 draws a cell: how often the stated intervals hold the truth"
	@echo "make soak    an hour of samples at 2.4 MS/s: nothing lost unnoticed, memory flat"
	@echo "make lock    write the lock files anew from pyproject.toml"
	@echo "make clean   remove .venv and what tools left behind (no record)"

tools:
	@sh hardware/setup.sh tools

run:
	@sh hardware/setup.sh run $(ARGS)

test: lint
	$(BIN)/python -m tests $(ARGS)

lint: tools
	$(BIN)/ruff check .
	$(BIN)/mypy
	$(BIN)/lint-imports --no-logo

bench: tools
	$(BIN)/python -m tests.bench $(ARGS)

soak: tools
	$(BIN)/python -m tests.soak $(ARGS)

coverage: tools
	$(BIN)/python -m tests.coverage $(ARGS)

# One resolution for every supported Python and both architectures; no address of an index in it.
LOCK = .venv/lock/bin/uv pip compile --quiet --upgrade --universal --fork-strategy fewest \
  --python-version 3.11 --generate-hashes --no-header --no-annotate --no-config \
  --no-emit-index-url --no-emit-find-links pyproject.toml --group build

lock: tools
	python3 -m venv .venv/lock && .venv/lock/bin/pip install --quiet uv
	$(LOCK) --output-file requirements.lock
	$(LOCK) --group test --group lint --constraint requirements.lock --output-file tests/requirements.lock

clean:
	rm -rf .venv build dist *.egg-info .pytest_cache .mypy_cache .ruff_cache .hypothesis .import_linter_cache
	find . -name __pycache__ -type d -prune -exec rm -rf {} +

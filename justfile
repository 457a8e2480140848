# The recipes that CI runs, by name. Everything works without `just` too: the commands are plain cargo.

# Format, lints, documentation, tests, outside checks: what CI runs.
ci:
    .ci/run

# The tests that need nothing but cargo.
test:
    cargo test

# The tests against cores, netlists and the simulator, and the benches.
outside *ARGS:
    tests/outside/run {{ARGS}}

# Fetches the outside data only.
fetch:
    tests/outside/fetch

bench:
    STILLWIRE_DATA=$(tests/outside/fetch) cargo bench --profile dev --bench iscas85 --bench scan_ratio

# Looks for crashes of the front end, for so many seconds.
fuzz SECONDS="60" *ARGS:
    cargo bench --profile dev --bench fuzz -- --seconds {{SECONDS}} {{ARGS}}

lint:
    cargo fmt --check
    cargo clippy --all-targets -- -D warnings

doc:
    RUSTDOCFLAGS="-D warnings" cargo doc --no-deps --document-private-items

# Scans the demo design.
demo:
    cargo run -- scan fixtures/lock

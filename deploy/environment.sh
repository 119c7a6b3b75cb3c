# Sourced by the commands beside it, not run: finds a Python, and keeps a virtual environment in
# step with a lock. Expects `root`, the checkout. Works with bash 3.2 and later.

venv=${DRIPLEG_VENV:-$root/.venv}

say() { printf '%s\n' "$*" >&2; }

give_up() {
    say "$@"
    exit 1
}

is_root_on_debian() { [ "$(id -u)" = 0 ] && command -v apt-get >/dev/null; }

debian_install() {
    say "Installing with apt-get: $*"
    apt-get update -qq && DEBIAN_FRONTEND=noninteractive apt-get install -qq -y "$@" >&2
}

# Prints the first Python on the PATH that is new enough.
find_python() {
    local candidate
    for candidate in python3 python3.13 python3.12 python3.11; do
        # A name can be on the PATH and not run: version managers leave such stand-ins.
        if "$candidate" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null; then
            printf '%s\n' "$candidate"
            return
        fi
    done
    give_up "dripleg needs Python 3.11 or newer, and none is on the PATH" \
        "(looked for python3, python3.13, python3.12, python3.11)." \
        "On Debian 12 or Raspberry Pi OS: sudo apt-get install python3 python3-venv"
}

# Debian takes the modules that make a virtual environment out of its Python.
require_venv_modules() {
    local python=$1 package
    "$python" -c 'import ensurepip, venv' 2>/dev/null && return
    package=$("$python" -c 'import sys; print("python%d.%d-venv" % sys.version_info[:2])')
    if is_root_on_debian && debian_install "$package"; then
        "$python" -c 'import ensurepip, venv' 2>/dev/null && return
    fi
    give_up "$python cannot make a virtual environment: its venv module is missing." \
        "On Debian or Raspberry Pi OS: sudo apt-get install $package"
}

# A fingerprint of what is installed from: another lock, project file, place or Python is another.
fingerprint() {
    "$1" - "$root" "$2" "$root/pyproject.toml" <<'PYTHON'
import hashlib, pathlib, sys
digest = hashlib.sha256(f"{sys.version} {sys.argv[1]}".encode())
for name in sys.argv[2:]:
    digest.update(pathlib.Path(name).read_bytes())
print(digest.hexdigest())
PYTHON
}

make_venv() {
    local python
    if [ -e "$venv" ] && [ ! -e "$venv/pyvenv.cfg" ] && [ -n "$(ls -A "$venv")" ]; then
        give_up "$venv is there and is no virtual environment; nothing was changed." \
            "Set DRIPLEG_VENV to another folder."
    fi
    python=$(find_python) || exit 1
    require_venv_modules "$python"
    say "Making a virtual environment in $venv"
    "$python" -m venv --clear "$venv"
}

# Brings the environment in step with a lock: quick when nothing has changed since the last time.
prepare() {
    local lock=$1 stamp wanted
    stamp=$venv/installed-from-$(basename "$lock")
    "$venv/bin/python" -c '' 2>/dev/null || make_venv
    wanted=$(fingerprint "$venv/bin/python" "$lock")
    if [ -e "$stamp" ] && [ "$(cat "$stamp")" = "$wanted" ]; then
        return
    fi
    say "Installing what $(basename "$lock") lists; the first time takes a minute or two"
    rm -f "$stamp"
    "$venv/bin/python" -m pip install -qq --disable-pip-version-check --requirement "$lock" ||
        give_up "Could not install: see above. It needs the network, this once."
    # The lock holds the build tools and every dependency: nothing more is fetched for this.
    "$venv/bin/python" -m pip install -qq --disable-pip-version-check \
        --no-deps --no-build-isolation --editable "$root" ||
        give_up "Could not install dripleg itself: see above."
    printf '%s\n' "$wanted" >"$stamp"
}

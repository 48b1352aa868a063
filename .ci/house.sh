# shellcheck shell=bash
# What ./start and tests/run share: which programs and libraries are needed, how they are installed,
# built, and how the page gets its curves. Sourced by bash; `root` is the project's folder.
#
# A need is looked for as a command or a pkg-config module, never as a package: who has node from
# elsewhere must not be given Debian's npm, which conflicts with it.

# KIND NAME PACKAGE
build_needs='
command cc gcc
command make make
command cmake cmake
command pkg-config pkg-config
module fftw3 libfftw3-dev
module fftw3f libfftw3-dev
module lapacke liblapacke-dev
module lapack liblapack-dev
module blas libblas-dev
module gsl libgsl-dev
module sndfile libsndfile1-dev
module portaudio-2.0 portaudio19-dev
module alsa libasound2-dev
module sqlite3 libsqlite3-dev
module zlib zlib1g-dev
module libmicrohttpd libmicrohttpd-dev
module gnutls libgnutls28-dev
module jansson libjansson-dev
module inih libinih-dev
module libsystemd libsystemd-dev
module libqrencode libqrencode-dev
module libcurl libcurl4-gnutls-dev
'
npm_needs='command npm npm'

say()
{
    printf '%s\n' "$*" >&2
}

have()
{
    case $1 in
    command) command -v "$2" >/dev/null 2>&1 ;;
    module) command -v pkg-config >/dev/null 2>&1 && pkg-config --exists "$2" 2>/dev/null ;;
    file) compgen -G "$2" >/dev/null ;;
    python) [ -x /usr/bin/python3 ] && /usr/bin/python3 -c "import $2" 2>/dev/null ;;
    esac
}

# Prints the packages behind the needs that are not met, each once.
missing_packages()
{
    local kind name package
    while read -r kind name package; do
        [ -n "$kind" ] || continue
        have "$kind" "$name" || printf '%s\n' "$package"
    done <<<"$1" | sort -u
}

as_root()
{
    if [ "$(id -u)" = 0 ]; then
        "$@"
    else
        sudo "$@"
    fi
}

# install_needs NEEDS: installs what is missing and touches nothing, not even the network, when all
# is there. Fails with one sentence that names the packages.
install_needs()
{
    local packages
    packages=$(missing_packages "$1" | tr '\n' ' ')
    packages=${packages% }
    [ -n "$packages" ] || return 0
    say "missing: $packages"
    if ! command -v apt-get >/dev/null 2>&1; then
        say "this system has no apt-get: install what these Debian packages hold, then start again"
        return 1
    fi
    if [ "$(id -u)" != 0 ] && ! command -v sudo >/dev/null 2>&1; then
        say "there is no sudo here: run this as root, then start again: apt-get install $packages"
        return 1
    fi
    say "installing them with apt-get ..."
    local quiet=(env DEBIAN_FRONTEND=noninteractive apt-get -qq -o Dpkg::Use-Pty=0)
    as_root "${quiet[@]}" update >&2 || say "the package lists could not be refreshed: going on with those at hand"
    # shellcheck disable=SC2086 # one word a package is meant
    if ! as_root "${quiet[@]}" install -y --no-install-recommends $packages >&2; then
        say "apt-get could not install them: see its words above; the network may be away"
        return 1
    fi
}

# build FOLDER [cmake words]: configures and builds, $targets of it when that is set; quiet unless it
# fails. A folder that was configured elsewhere (the clone was moved or renamed) is made anew.
build()
{
    local folder=$1
    shift
    local cache=$folder/CMakeCache.txt
    if [ -f "$cache" ] && ! grep -qxF "CMAKE_HOME_DIRECTORY:INTERNAL=$root" "$cache"; then
        say "$folder was made elsewhere: building anew ..."
        rm -rf "$cache" "$folder/CMakeFiles" "$folder/src" "$folder/tests"
    fi
    mkdir -p "$folder"
    local log=$folder/build.log
    if cmake -S "$root" -B "$folder" "$@" >"$log" 2>&1 &&
        cmake --build "$folder" -j"$(nproc)" ${targets:+--target $targets} >>"$log" 2>&1; then
        return 0
    fi
    grep -E -A6 'error:|CMake Error|undefined reference' "$log" | head -40 >&2
    say "the build failed: the whole of it is in $log"
    return 1
}

# npm_ci FOLDER LOG: the packages of its lock file, exactly; gives up soon where the registry is away.
npm_ci()
{
    (cd "$1" && npm ci --ignore-scripts --no-audit --no-fund --prefer-offline \
        --fetch-retries=1 --fetch-timeout=20000) >"$2" 2>&1
}

# curves FOLDER: puts uPlot, which draws the page's curves, into FOLDER/web/vendor. npm runs only
# when web/package-lock.json is another than the last time. Never fails: without it the page lacks
# its curves and says so.
curves()
{
    local folder=$1 lock=$root/web/package-lock.json place=$1/npm vendor=$1/web/vendor
    [ -f "$lock" ] || return 0
    if [ -f "$vendor/uPlot.esm.js" ] && cmp -s "$lock" "$place/fetched-lock.json"; then
        return 0
    fi
    install_needs "$npm_needs" || {
        say "without npm the page goes without its curves"
        return 0
    }
    mkdir -p "$place" "$vendor"
    cp "$root/web/package.json" "$lock" "$place/"
    if ! npm_ci "$place" "$place/npm.log"; then
        say "npm could not fetch uPlot (see $place/npm.log): the page goes without its curves until this is run again with its registry in reach"
        return 0
    fi
    for file in uPlot.esm.js uPlot.iife.min.js uPlot.min.css; do
        cp "$place/node_modules/uplot/dist/$file" "$vendor/"
    done
    cp "$lock" "$place/fetched-lock.json"
}

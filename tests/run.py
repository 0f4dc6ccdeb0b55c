"""Install all that the tests need, then run every check and every test.

Needs Python 3.11+ and nothing else. Works in a virtual environment of its own
(.venv-tests). On Debian and its kin the system libraries for Qt, OpenGL and the virtual
screen are installed when they are missing and the user may install them.
"""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from importlib.util import find_spec
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
VENV = ROOT / ".venv-tests"
BIN = VENV / ("Scripts" if os.name == "nt" else "bin")
DEBIAN_PACKAGES = (
    "xvfb",
    "xauth",
    "libgl1",
    "libegl1",
    "libgl1-mesa-dri",
    "libglib2.0-0",
    "libfontconfig1",
    "libxkbcommon-x11-0",
    "libxcb-cursor0",
    "libxcb-icccm4",
    "libxcb-keysyms1",
    "libxcb-image0",
    "libxcb-randr0",
    "libxcb-render-util0",
    "libxcb-shape0",
    "libxcb-xinerama0",
    "libdbus-1-3",
)


def run(*command: str | Path) -> None:
    """Run one command in the project's folder; stop everything when it fails."""
    words = [str(word) for word in command]
    print("+", " ".join(words), flush=True)
    environment = os.environ | {"PIP_DISABLE_PIP_VERSION_CHECK": "1"}
    status = subprocess.run(words, cwd=ROOT, env=environment, check=False).returncode
    if status:
        sys.exit(status)


def installed(package: str) -> bool:
    """Tell whether Debian's package is there (under its 64-bit-time name too)."""
    for name in (package, f"{package}t64"):
        answer = subprocess.run(
            ["dpkg-query", "-W", "-f", "${db:Status-Status}", name],
            capture_output=True,
            text=True,
            check=False,
        )
        if answer.stdout.startswith("installed"):
            return True
    return False


def install_system_libraries() -> None:
    """Install what is missing of the libraries for Qt, OpenGL and the virtual screen."""
    if shutil.which("apt-get") is None:
        return
    missing = [name for name in DEBIAN_PACKAGES if not installed(name)]
    if find_spec("ensurepip") is None:
        missing.append("python3-venv")
    if not missing:
        return
    apt = ["apt-get", "-o", "Acquire::Retries=3"]
    if os.geteuid() != 0:
        sudo = shutil.which("sudo")
        if sudo is None or subprocess.run([sudo, "-n", "true"], check=False).returncode:
            sys.exit(
                "The viewer's tests need system libraries that you may not install. Ask for: "
                f"sudo apt-get install --no-install-recommends {' '.join(missing)}"
            )
        apt = [sudo, "-n", *apt]
    os.environ["DEBIAN_FRONTEND"] = "noninteractive"
    run(*apt, "update", "-q")
    run(*apt, "install", "-y", "-q", "--no-install-recommends", *missing)


def main() -> None:
    """Check the code, then test it first without napari and then with it."""
    install_system_libraries()
    run(sys.executable, "-m", "venv", "--clear", VENV)
    python = BIN / "python"
    run(python, "-m", "pip", "install", "-q", ".[cluster,test]")
    run(python, "-m", "ruff", "check")
    run(python, "-m", "ruff", "format", "--check")
    run(python, "-m", "mypy")
    run(BIN / "lint-imports")
    run(python, "-m", "pytest", "--ignore=tests/viewer", "-p", "no:pytest-qt", *sys.argv[1:])
    run(python, "-m", "pip", "install", "-q", ".[viewer]")
    screen = ["xvfb-run", "-a", "-s", "-screen 0 1920x1080x24"] if shutil.which("xvfb-run") else []
    run(*screen, python, "-m", "pytest", "tests/viewer", *sys.argv[1:])


if __name__ == "__main__":
    main()

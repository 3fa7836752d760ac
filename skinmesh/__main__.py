"""``python -m skinmesh`` is the command ``skinmesh``."""

from skinmesh.commands.main import main

if __name__ == "__main__":
    main()

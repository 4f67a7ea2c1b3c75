"""Device files: TOML to a description, and every mistake in one to a single line.

A device file has the fields of the description it stands for under the same names; ``kind`` says which (`kinds.KINDS`).
The table ``[cycle]`` names one of the constructors of `Cycle` in its own ``kind`` and gives that constructor's
arguments.  Files that are named in it, a table or a Python file, are looked for next to the device file.
"""

from scatterpump.device_file.changes import put
from scatterpump.device_file.read import load_device, read_content, read_device

__all__ = ["load_device", "put", "read_content", "read_device"]

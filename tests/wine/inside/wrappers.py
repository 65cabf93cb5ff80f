"""Print the wrappers that xlwings itself would write for the module of functions, as JSON."""

import io
import json
import types

from xlwings.udfs import generate_vba_wrapper

from steelyard.addin.excel import udfs

out = io.StringIO()
generate_vba_wrapper(udfs.__name__, udfs, out, types.SimpleNamespace(Name="steelyard.xlam"))
print(json.dumps(out.getvalue()))

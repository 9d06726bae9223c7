"""The results beside the parts they are about: comments in the netlist, marks on a drawing.

Both are bytes in, bytes out. What is added can be recognised, is replaced by the next run and
removed to the byte; everything else stays as it was.
"""

from tauledger.annotate.comments import annotate_netlist, remove_comments
from tauledger.annotate.drawing import Drawing, annotate_drawings, remove_marks
from tauledger.annotate.files import (
    check_files,
    read_drawings,
    removed,
    replace_file,
    write_files,
)

__all__ = [
    "Drawing",
    "annotate_drawings",
    "annotate_netlist",
    "check_files",
    "read_drawings",
    "remove_comments",
    "remove_marks",
    "removed",
    "replace_file",
    "write_files",
]

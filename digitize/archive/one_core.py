"""One page has one core: libraries that would divide their arithmetic among threads do not.

Such threads would stand in the way of the pages beside it, and no fork takes them along. To import
this module, before the libraries are loaded, is to say so.
"""

import os

for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_name, "1")

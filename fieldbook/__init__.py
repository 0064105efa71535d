"""Fieldbook: the field book of a static GNSS occupation, from the receiver's bytes to the certificate."""

import os

# Our matrices are 32 x 32: threads of the linear algebra library cost more than they bring there (measured on two
# cores: 0.2 s against 0.4 to 4 s for one convergence curve). Has to be said before numpy is first imported.
for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ.setdefault(_name, "1")

__version__ = "0.1.0"

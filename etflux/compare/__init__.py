"""A run held against measurements: lysimeter, flux tower, another network's reference ET.

``metrics`` has one measure per function, ``measurements`` the reader of a tidy file, ``pairing`` the comparison,
``figures`` and ``files`` what people get.
"""

from etflux.compare.files import summary_text, write_comparison
from etflux.compare.measurements import Measurements, read_measurements
from etflux.compare.metrics import (
    bias,
    index_of_agreement,
    outside_band,
    r_squared,
    rmse,
    scores,
    slope_through_origin,
)
from etflux.compare.pairing import Comparison, compare, measurements_from

__all__ = [
    "Comparison", "Measurements", "bias", "compare", "index_of_agreement", "measurements_from", "outside_band",
    "r_squared", "read_measurements", "rmse", "scores", "slope_through_origin", "summary_text",
    "write_comparison",
]  # fmt: skip

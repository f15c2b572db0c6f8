"""Pictures of the scan: rays, sections, projections and the marks on them."""

from tomofolio.render.camera import Camera
from tomofolio.render.field import RayField, make_field
from tomofolio.render.png import write_png
from tomofolio.render.rays import cast_rays
from tomofolio.render.tables import TransferTable, make_tables
from tomofolio.render.view import Caption, Key, Mark, Stroke, View
from tomofolio.render.views import standard_views
from tomofolio.render.window import apply_window, window_from_ranges

__all__ = [
    "Camera",
    "Caption",
    "Key",
    "Mark",
    "RayField",
    "Stroke",
    "TransferTable",
    "View",
    "apply_window",
    "cast_rays",
    "make_field",
    "make_tables",
    "standard_views",
    "window_from_ranges",
    "write_png",
]

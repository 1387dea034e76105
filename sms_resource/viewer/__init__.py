"""The window: a scene of seafloor, blocks and holes from a folder of results."""

from sms_resource.viewer.errors import ResultsError, ViewerUnavailable
from sms_resource.viewer.open import open_scene

__all__ = ["ResultsError", "ViewerUnavailable", "open_scene"]

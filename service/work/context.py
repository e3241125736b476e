"""In whose name the service itself writes."""

from typing import Final

from service.store.scope import EVERYTHING
from service.store.session import WriteContext

ITSELF: Final = WriteContext(key_id=None, scope=EVERYTHING)

"""Pictures."""
from typing import Any
def pictures(record: Any) -> tuple[Any, ...]:
    return ()

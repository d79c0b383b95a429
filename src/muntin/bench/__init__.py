"""The plate itself: well positions and layout."""

"""Request and answer models: pydantic lives here, at the HTTP border, and nowhere further in."""

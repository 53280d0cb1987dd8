"""How the solid Earth answers a load: layers, Love numbers, frames, rotation, response per degree."""

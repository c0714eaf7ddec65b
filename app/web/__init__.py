"""Routes, pages and security: adapts the packages below to HTTP, without any physics of its own."""

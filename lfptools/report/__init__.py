"""Results in; tables, arrays, a manifest, a methods text and a page that opens offline out."""

"""Commands of more than a few lines, one module each; `gibbsmin.cli` registers them."""

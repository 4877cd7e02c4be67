"""From a result to text. Renderers compute nothing but roundings."""

"""One file a figure: each takes a result and an axes, returns the axes and computes nothing.

`sheets` lays the single figures out on pages; `style` holds colours, lines and sizes.
"""

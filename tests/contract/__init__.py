"""The public contract of the package: names, signatures, shapes, order, and what stays fixed."""

"""What a file must mean, once its structure is right: references, flow path, limits, devices, volumes.

Each check looks at whatever parsed, adds findings and never raises. Nothing here reads a file or makes a model value.
"""

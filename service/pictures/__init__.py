"""Pictures of fields, an optional extra that needs matplotlib; nothing here imports it before `draw` is called.

draw.py      draw(kind, coefficients, field, options, form) -> bytes: the one way in
options.py   PictureOptions, checked once
palettes.py  colours, computed in a colour space where equal steps look equal
scales.py    values to colours
contours.py  levels of contour lines, samples fine enough to draw them
geometry.py  planes laid flat in true shape; where they cut the unit cells
panels.py    samples on planes and in boxes as flat panels
parts.py     components of vectors, parts of complex values
captions.py  what must be said under a picture
canvas.py    the sheet: settings, text that fits, bytes        } these four import matplotlib
curves.py    profiles                                          }
maps.py      slices and sheets of sections, as a whole          }
layers.py    image, contour lines, outlines, colour bar        }
"""

from service.pictures.draw import draw, require_matplotlib
from service.pictures.options import PictureOptions

__all__ = ["PictureOptions", "draw", "require_matplotlib"]

"""Film frames by name: what the trade calls them, and the picture they really hold.

Sizes are image areas, width by height held sideways, mm. 36 x 24: ISO 1007. Roll film: as commonly
tabulated; backs of 6x12 differ (112 or 118 mm), so a width and a height may be given instead. Sheets:
image inside the holder's rails (from memory). Paper: the whole sheet, ISO 1008 (from memory).
"""

FRAMES_MM: dict[str, tuple[float, float]] = {
    "24x36": (36.0, 24.0),
    "36x24": (36.0, 24.0),
    "6x4.5": (56.0, 41.5),
    "6x6": (56.0, 56.0),
    "6x7": (69.5, 56.0),
    "6x8": (77.0, 56.0),
    "6x9": (84.0, 56.0),
    "6x12": (112.0, 56.0),
    "6x17": (168.0, 56.0),
    "4x5": (120.0, 95.0),
    "5x7": (170.0, 120.0),
    "8x10": (245.0, 194.0),
    "4x5-paper": (127.0, 101.6),
    "5x7-paper": (178.0, 127.0),
    "8x10-paper": (254.0, 203.0),
    "10x15cm-paper": (152.0, 102.0),
}

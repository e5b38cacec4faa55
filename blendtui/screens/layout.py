"""How the lines of the screens share out the terminal: the whole style sheet, for everything else is drawn."""

from __future__ import annotations

CSS = """
Screen { layout: vertical; overflow: hidden; background: ansi_default; color: ansi_default; }
#title, #edit, #answer, #caution { height: 1; }
#status { height: 2; }
#keys { height: 2; }
.-wide #status { height: 1; }
#stocks, #comparison, #notes, #text { height: 1fr; }
#sides { layout: horizontal; height: 1fr; }
#products { width: 22; height: 1fr; }
#cells { width: 1fr; height: 1fr; margin-left: 1; }
.-wide #products { width: 40; }
#head { height: 2; }
#shares { height: 9; }
#trials { height: 8; }
#batches, #charges { height: 1fr; }
#summary { display: none; height: 16; }
.-wide #summary { display: block; }
#vessels { height: 1fr; display: none; }
.-vessels #vessels { display: block; }
.-vessels #batches, .-vessels #summary { display: none; }
#blends { height: 1fr; }
#taught { height: 7; }
.-wide #taught { height: 14; }
#tests { height: 1fr; display: none; }
.-testing #charges { display: none; }
.-testing #tests, .-wide #tests, .-wide #charges { display: block; }
"""

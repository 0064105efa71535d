"""The screens: a bound field book in the terminal. The only part that imports Textual.

Every panel is a list of rows of plain spans (`rows`), drawn line by line and repainted only where a line changed
(`panel`). What the screens ask of the book and the recorder goes through one door, `bridge.Bridge`.
"""

"""Pictures of the whole body beside the modelled sector.

From the case to the file, one idea in each module:

- `shown`: which field and which measure of it gives the colours;
- `scene`: the two grids, their deformation and the words around them;
- `views`: from where one looks;
- `colours`: colour maps that everybody can read, and round numbers for the scale;
- `layout`: where sector and body lie on the sheet, at one scale;
- `surfaces`: the faces and lines that are drawn;
- `pictures`: the picture itself, drawn without a screen;
- `offscreen`: whether this machine can draw at all, and silence while it does;
- `legend` and `lettering`: the text and the colour scale on the sheet;
- `commands` and `demo`: the commands `seamfold picture` and `seamfold demo`.

The expander does not know of this package, and nothing here knows mechanics.
"""

//! Charts, schematic, parts list, bench sheet, the page.

"""Pictures, films and pages for people who know neither GNSS nor meteorology.

Everything here reads the files of an output folder alone, and says what it says in the sentences
of a language file. Lengths of pictures are pixels from the lower left corner.
"""

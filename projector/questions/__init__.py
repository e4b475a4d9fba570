"""Questions put to a study after its run: the only room that projects paths again to answer."""

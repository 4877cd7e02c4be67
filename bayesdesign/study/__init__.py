"""The study: what is asked, believed, recorded and decided; and the files that say so."""

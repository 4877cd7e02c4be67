"""Laws that every study must obey, over random studies."""

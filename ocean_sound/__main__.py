"""`python -m ocean_sound` is the `ocean-sound` command."""

from .cli import main

main()

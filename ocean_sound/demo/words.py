"""What the demonstration says besides its numbers."""

TITLE = """\
OCEAN_SOUND DEMONSTRATION
The survey from Ostray Firth to Ostray Deep is invented, places and data alike. The cast of part 7 is real."""

NEXT = """\
What to look at next
   shelf-edge-cast.png        the cast with its flags, its speed, layer, gradient and uncertainty
   shelf-edge-later.png       what eight hours did to the water, and to soundings
   deep-water-rays.png        rays and shadow of a source at 100 m
   slope-rays.png             rays through two casts and over the slope between them; slope-shadow.png: their shadow
   shelf-edge-loss.png        transmission loss over the shelf
   receivers.html             one page on receivers around a bank: coverage, sites, cautions; receivers.png: its map
   real-cast-profile.png      a real cast; real-cast-equations.csv: its speed by every equation
   deep-water-rays.nc         the same rays and shadow as CF netCDF (xarray opens it)
   archive.nc, archive.png    all casts that come with the package in one file
   survey-swath.png           errors of a survey across a front with one cast, and with all
   survey-passport.png        one of its soundings: ray, casts, and uncertainty by cause
Then your own:
   ocean-sound cast YOUR-CAST.csv --check --figure sheet.png
   ocean-sound cast YOUR-CAST.csv --compare ANOTHER.csv --figure comparison.png
   ocean-sound rays YOUR-CAST.csv --source-depth 30 --max-range 10000 --shadow --figure rays.png
   ocean-sound rays YOUR-PLAN.toml --figure section.png    (casts along a track, arrivals, loss: see examples/)
   ocean-sound sensors YOUR-PLAN.toml --report plan.html    (places for receivers: see examples/)
   ocean-sound archive build FOLDER-OF-CASTS -o archive.nc
   ocean-sound soundings YOUR-LINE.nc --casts FOLDER-OF-CASTS -o corrected.nc
   ocean-sound speed --temperature 10 --salinity 35 --depth 100 --latitude 45"""

CAUTIONS = """\
Cautions
   An aid, not a navigational product: the hydrographer in charge and the responsible authority's own specification
   decide whether a survey meets its order. Sound sources can injure divers and marine life: follow local regulations
   and licensed practice."""

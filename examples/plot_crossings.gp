# Draws where the couplers go against the tilt of the mount, and how far the rings miss each other where they do.
#
#   twincone run examples/tune.toml -o tune.csv
#   gnuplot -e "table='tune.csv'; figure='crossings.png'" examples/plot_crossings.gp
#
# Columns are found by name; rows that are not `ok` have empty cells, which leave the curve out.

if (!exists("table")) table = "tune.csv"
if (!exists("figure")) figure = "crossings.png"

set terminal pngcairo size 960,840 font "Sans,11"
set output figure
set datafile separator comma
set datafile missing ""
set grid linetype 1 linewidth 0.5 dashtype 1 linecolor rgb "#c8c8c8"
set style data lines

# told apart by every eye, and by dashes without colour
set linetype 1 linewidth 2 dashtype 1 linecolor rgb "#0072B2"
set linetype 2 linewidth 2 dashtype 2 linecolor rgb "#D55E00"
set linetype 3 linewidth 2 dashtype 4 linecolor rgb "#000000"

# both panels over the whole sweep
stats table using "crystal_tilt_deg" name "tilt" nooutput
set xrange [tilt_min:tilt_max]

set multiplot layout 2,1 title "Crossings, angles outside the crystal"

set yrange [0:*]
set key top left Left reverse
set xlabel "tilt of the mount (deg)"
set ylabel "angle (deg)"
plot table using "crystal_tilt_deg":"separation_deg" title "between a and b", \
     "" using "crystal_tilt_deg":"a_polar_deg" title "between a and the pump", \
     "" using "crystal_tilt_deg":"gap_deg" title "gap between the rings"

set ylabel "angle between the curves (deg)"
set yrange [0:95]
plot table using "crystal_tilt_deg":"intersection_angle_deg" notitle

unset multiplot

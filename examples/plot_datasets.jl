# Draws the angle of the crossings from the pump against tilt, a curve for each published set of indices.
#
#   twincone run examples/datasets.toml -o datasets.csv
#   julia examples/plot_datasets.jl datasets.csv datasets.png
#
# Needs the packages CSV, DataFrames and Plots. Curves differ in dashes and marks as well as in colour.

ENV["GKSwstype"] = "100"   # no display needed; read when Plots starts
using CSV, DataFrames, Plots

table = length(ARGS) >= 1 ? ARGS[1] : "datasets.csv"
figure = length(ARGS) >= 2 ? ARGS[2] : "datasets.png"

rows = CSV.read(table, DataFrame)
# where rings do not cross the angle is empty
crossing = filter(:status => ==("ok"), rows)
isempty(crossing) && error("$table: no rings cross at any of these tilts")

# told apart by every eye: blue, vermilion, bluish green, black
colors = ["#0072B2", "#D55E00", "#009E73", "#000000"]
dashes = [:solid, :dash, :dot, :dashdot]
marks = [:circle, :utriangle, :rect, :dtriangle]

p = plot(
    xlabel = "tilt of the mount (deg)",
    ylabel = "crossing from the pump, outside (deg)",
    legend = :bottomright,
    size = (900, 600),
    margin = 5Plots.mm,
)
for (n, set) in enumerate(groupby(crossing, :crystal_dataset, sort = false))
    look = mod1(n, length(colors))
    tilt, angle = set.crystal_tilt_deg, Float64.(set.a_polar_deg)
    name = string(first(set.crystal_dataset))
    plot!(p, tilt, angle, label = name, color = colors[look], linestyle = dashes[look], linewidth = 2)
    some = 1:8:length(tilt)
    scatter!(p, tilt[some], angle[some], label = "", color = colors[look], markershape = marks[look])
end
savefig(p, figure)

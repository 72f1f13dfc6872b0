"""Reads exported NetCDF with xarray and holds it against the CSV of the same rows. Argument: the folder with PRODUCT.nc and PRODUCT.csv."""
import csv
import datetime
import sys

import numpy
import xarray

folder = sys.argv[1]
LENGTH = {"minutes": 60, "clean-minute": 60, "clean-hour": 3600, "clean-day": 86400}


def number(text):
    return float(text) if text else float("nan")


def check(condition, what):
    if not condition:
        sys.exit("netcdf: " + what)


for product in ["minutes", "raw", "clean-minute", "clean-hour", "clean-day", "clean-month"]:
    with open(f"{folder}/{product}.csv", newline="") as f:
        rows = list(csv.DictReader(f))
    data = xarray.open_dataset(f"{folder}/{product}.nc")
    check(data.sizes["time"] == len(rows) > 0, f"{product}: {data.sizes['time']} records for {len(rows)} rows")
    stamps = [numpy.datetime64(r["time"].rstrip("Z")) for r in rows]
    check((data["time"].values == numpy.array(stamps, dtype="datetime64[ns]")).all(), f"{product}: times differ")
    check(float(data["lat"]) == 57.121 and float(data["lon"]) == -3.642 and float(data["alt"]) == 640, f"{product}: the place")
    check(data.attrs["license"] == "CC-BY-4.0" and "W-26-007" in data.attrs["calibrations"], f"{product}: licence or calibrations")
    compared = 0
    for name in rows[0]:
        variable = name.replace(":", "_")
        if name == "time" or variable not in data:
            continue
        v = data[variable]
        if "flag_values" in v.attrs:
            words = v.attrs["flag_meanings"].split()
            by = dict(zip(numpy.atleast_1d(v.attrs["flag_values"]).tolist(), words))
            got = [by[int(x)] if x == x else "" for x in v.values]
            want = [r[name].replace(";", "+") for r in rows]
            same = all(g == w or g == "none" and w == "" for g, w in zip(got, want))
        else:
            want = numpy.array([number(r[name]) for r in rows])
            half = 0 if product == "raw" else 0.06 if variable.startswith("pressure") else 0.006
            same = numpy.allclose(v.values.astype(float), want, rtol=0, atol=half, equal_nan=True)
            housekeeping = v.attrs["long_name"].startswith("housekeeping")  # a site file does not say its unit
            check(housekeeping or v.dtype.kind != "f" or "units" in v.attrs, f"{product}: {name} has no units")
        check(same, f"{product}: {name} differs from the CSV")
        compared += 1
    check(compared >= 8, f"{product}: only {compared} columns compared")
    if product in LENGTH:
        check("time_bnds" in data, f"{product}: no bounds")
        width = (data["time_bnds"][:, 1] - data["time_bnds"][:, 0]).values / numpy.timedelta64(1, "s")
        check((width == LENGTH[product]).all(), f"{product}: bounds of another length")
        check((data["time_bnds"][:, 0].values == data["time"].values).all(), f"{product}: bounds begin elsewhere")
        check(data["global"].attrs["cell_methods"] == "time: mean", f"{product}: cell methods")
        for other in data["global"].attrs["ancillary_variables"].split():
            check(other in data, f"{product}: ancillary variable {other} is not there")
    print(f"{product}: {len(rows)} records, {compared} columns as in the CSV")

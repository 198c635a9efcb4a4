"""Laying the weather table out: days, gaps, duplicates, the hour at which a station is read."""

import numpy as np
import pandas as pd

from etflux import weather


def _at(rows, station, date):
    return (rows["station_id"] == station) & (rows["date"] == date)


def test_every_day_is_there_and_missing_ones_are_nan(make):
    rows = make.weather()
    rows = rows[~_at(rows, "near", "2031-06-10")].reset_index(drop=True)
    record = weather.arrange(make.case(rows))
    assert record.shape == (60, 3)
    assert np.isnan(record.values["t_max_c"][9, 0])
    assert record.row_of[9, 0] == -1
    assert record.source["t_max_c"][9, 0] == 128
    assert np.isfinite(record.values["t_max_c"]).sum() == 179


def test_order_of_rows_does_not_matter(make):
    rows = make.weather()
    shuffled = rows.sample(frac=1.0, random_state=1).reset_index(drop=True)
    one, two = weather.arrange(make.case(rows)), weather.arrange(make.case(shuffled))
    for name, values in one.values.items():
        assert np.array_equal(values, two.values[name], equal_nan=True), name


def test_of_two_rows_of_one_day_the_first_counts(make):
    rows = make.weather()
    twice = pd.concat([rows, rows[_at(rows, "near", "2031-06-10")].assign(t_max_c=40.0)], ignore_index=True)
    record = weather.arrange(make.case(twice))
    assert record.values["t_max_c"][9, 0] == rows[_at(rows, "near", "2031-06-10")]["t_max_c"].item()


def test_unknown_stations_and_blank_dates_are_left_out(make):
    rows = make.weather()
    rows.loc[3, "station_id"] = "nobody"
    rows.loc[5, "date"] = pd.NaT
    record = weather.arrange(make.case(rows))
    assert record.station_ids == ("near", "by", "far")
    assert np.flatnonzero(record.row_of[:, 0] < 0).tolist() == [3, 5]


def test_settings_narrow_the_days_and_a_leap_day_is_a_day(make):
    rows = make.weather(days=60, start="2032-02-01")
    record = weather.arrange(make.case(rows, settings={"season_start": "2032-02-27", "season_end": "2032-03-02"}))
    assert record.dates.astype(str).tolist() == [
        "2032-02-27", "2032-02-28", "2032-02-29", "2032-03-01", "2032-03-02",
    ]  # fmt: skip


def test_morning_observer_reads_yesterday(make):
    rows = make.weather()
    record = weather.arrange(make.case(rows, make.stations(observation_hour=[7.0, 24.0, 24.0])))
    near = rows[rows["station_id"] == "near"].reset_index(drop=True)
    for name in ("rain_mm", "t_max_c"):
        assert np.array_equal(record.values[name][:-1, 0], near[name][1:])
        assert np.isnan(record.values[name][-1, 0])
    assert np.array_equal(record.values["t_min_c"][:, 0], near["t_min_c"])
    assert np.array_equal(record.values["rain_mm"][:, 1], rows[rows["station_id"] == "by"]["rain_mm"])


def test_row_numbers_are_those_of_the_table(make):
    rows = make.weather(days=40).sample(frac=1.0, random_state=2).reset_index(drop=True)
    record = weather.arrange(make.case(rows))
    for day, station in ((0, 0), (17, 1), (39, 2)):
        row = rows.loc[record.row_of[day, station]]
        assert (row["station_id"], row["date"]) == (record.station_ids[station], pd.Timestamp(record.dates[day]))


def test_of_three_rows_shuffled_the_first_in_the_table_counts(make):
    rows = make.weather(days=40)
    wanted = _at(rows, "by", "2031-06-03")
    later = [rows[wanted].assign(t_max_c=value, rain_mm=value) for value in (41.0, 42.0)]
    table = pd.concat([later[1], rows, later[0]], ignore_index=True)  # the value that counts stands in row 0
    record = weather.arrange(make.case(table))
    assert record.row_of[2, 1] == 0
    assert record.values["t_max_c"][2, 1] == record.values["rain_mm"][2, 1] == 42.0


def test_settings_may_ask_for_days_without_a_row(make):
    rows = make.weather(days=40)
    record = weather.arrange(make.case(rows, settings={"season_start": "2031-05-30", "season_end": "2031-07-12"}))
    assert record.dates[[0, -1]].astype(str).tolist() == ["2031-05-30", "2031-07-12"]
    assert (record.row_of >= 0).any(axis=1).nonzero()[0].tolist() == list(range(2, 42))
    assert (record.source["t_max_c"][[0, 1, 42, 43]] == 128).all()
    backwards = weather.arrange(make.case(rows, settings={"season_start": "2031-07-12", "season_end": "2031-06-12"}))
    assert backwards.shape == (0, 3)


def test_morning_reading_after_the_last_day_completes_it(make):
    rows = make.weather(days=40)
    stations = make.stations(observation_hour=[7.0, 24.0, 24.0])
    record = weather.arrange(make.case(rows, stations, settings={"season_end": "2031-06-20"}))
    next_morning = rows[_at(rows, "near", "2031-06-21")]
    assert record.values["t_max_c"][-1, 0] == next_morning["t_max_c"].item()
    assert record.values["rain_mm"][-1, 0] == next_morning["rain_mm"].item()
    assert record.values["t_min_c"][-1, 0] == rows[_at(rows, "near", "2031-06-20")]["t_min_c"].item()


def test_noon_is_not_morning(make):
    rows = make.weather(days=40)
    record = weather.arrange(make.case(rows, make.stations(observation_hour=[12.0, 11.9, np.nan])))
    for station, moved in ((0, 0), (1, 1), (2, 0)):
        own = rows[rows["station_id"] == record.station_ids[station]]["rain_mm"].to_numpy()
        assert np.array_equal(record.values["rain_mm"][: 40 - moved, station], own[moved:])


def test_forecast_days_say_so(make):
    rows = make.weather()
    rows["forecast"] = rows["date"] >= "2031-07-28"
    record = weather.arrange(make.case(rows))
    assert record.forecast[-3:].all()
    assert not record.forecast[:-3].any()
    assert (record.source["t_max_c"][-3:] == 16).all()


def test_nothing_gives_an_empty_record(make):
    record = weather.arrange(make.case(make.weather().iloc[:0]))
    assert record.shape == (0, 3)
    assert weather.quality(record) == []

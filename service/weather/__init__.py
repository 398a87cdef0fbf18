"""Weather: station days in, cell days out."""

from service.weather.cells import neighbours
from service.weather.derived import cell_days
from service.weather.station_file import take_station_days

__all__ = ["cell_days", "neighbours", "take_station_days"]

"""Configuration that gunicorn reads (`--config python:api.gunicorn_config`): how it logs."""

from workers.logs import for_gunicorn
from workers.settings import Settings

logconfig_dict = for_gunicorn(Settings.from_environment().log_level)

import os

# As the service runs: one BLAS thread, set before NumPy is imported.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
os.environ.setdefault("OMP_NUM_THREADS", "1")

import pytest
from flask import Flask
from flask.testing import FlaskClient
from hypothesis import settings

settings.register_profile("molwright", deadline=None, derandomize=True)
settings.load_profile("molwright")


@pytest.fixture(scope="session")
def app() -> Flask:
    from service.app import create_app

    made = create_app()
    made.config["PROPAGATE_EXCEPTIONS"] = False
    return made


@pytest.fixture
def client(app: Flask) -> FlaskClient:
    return app.test_client()

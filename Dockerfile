# Build: the wheel, and the locked dependencies with their hashes checked.
FROM python:3.11-slim AS build
WORKDIR /build
ENV PIP_DISABLE_PIP_VERSION_CHECK=1
RUN python -m venv --without-pip /opt/backend \
    && python -m venv --without-pip /opt/molwright
COPY requirements.lock .ci/requirements-build.lock ./
RUN pip --python /opt/backend/bin/python install --no-cache-dir --require-hashes -r requirements-build.lock \
    && pip --python /opt/molwright/bin/python install --no-cache-dir --require-hashes -r requirements.lock
COPY pyproject.toml README.md LICENSE ./
COPY core ./core
COPY schemas ./schemas
COPY service ./service
RUN pip --python /opt/backend/bin/python wheel --no-cache-dir --no-deps --no-build-isolation --wheel-dir wheels . \
    && pip --python /opt/molwright/bin/python install --no-cache-dir --no-deps wheels/*.whl

# Run: the environment alone. Nothing is written outside /tmp and /dev/shm.
FROM python:3.11-slim
COPY --from=build /opt/molwright /opt/molwright
ENV PATH=/opt/molwright/bin:$PATH \
    HOME=/tmp \
    PYTHONDONTWRITEBYTECODE=1 \
    OPENBLAS_NUM_THREADS=1 \
    OMP_NUM_THREADS=1 \
    MOLWRIGHT_HOST=0.0.0.0 \
    MOLWRIGHT_PORT=8410
WORKDIR /tmp
USER 1000:1000
EXPOSE 8410
HEALTHCHECK --interval=10s --timeout=5s --start-period=30s \
    CMD ["python", "-c", "import os, urllib.request; urllib.request.urlopen(f'http://127.0.0.1:{os.environ[\"MOLWRIGHT_PORT\"]}/healthz', timeout=4)"]
CMD ["molwright", "serve"]

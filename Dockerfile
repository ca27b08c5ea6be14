FROM python:3.11-slim

RUN useradd --create-home --uid 10001 sojourn \
    && mkdir /data /var/cache/sojourn \
    && chown sojourn /data /var/cache/sojourn

WORKDIR /sojourn
COPY pyproject.toml README.md LICENSE ./
COPY estimators estimators
COPY service service
COPY demo_data demo_data

# The README's own steps.
RUN python3.11 -m venv .venv
RUN .venv/bin/pip install --quiet .

ENV SOJOURN_HOST=0.0.0.0 \
    SOJOURN_PORT=8000 \
    SOJOURN_DATA=/data \
    NUMBA_CACHE_DIR=/var/cache/sojourn
USER sojourn
VOLUME /data
EXPOSE 8000
CMD [".venv/bin/sojourn", "serve"]

# The service in one image: built with the locked packages, run without root, one process.
#
#   docker build --tag stillfield .
#   docker run --rm --publish 127.0.0.1:8000:8000 --volume stillfield:/data stillfield

FROM python:3.13-slim-bookworm AS build
ENV PIP_DISABLE_PIP_VERSION_CHECK=1 \
    PIP_NO_CACHE_DIR=1 \
    PIP_NO_COMPILE=1
# Workers of a cluster are this image with more packages: docker build --build-arg LOCK=service/cluster.lock ...
ARG LOCK=service/requirements.lock
COPY ${LOCK} /tmp/requirements.lock
RUN python -m venv /opt/stillfield/venv \
    && /opt/stillfield/venv/bin/pip install --require-hashes --only-binary :all: --requirement /tmp/requirements.lock
# Side by side, as in a checkout: the service looks for the examples next to its own folder.
COPY openapi_examples /opt/stillfield/openapi_examples
COPY service /opt/stillfield/service
# Compiled here, because at run time nothing may be written there, and a start without costs three times as long.
# By content and not by date, so that a copy between stages cannot make them stale.
RUN /opt/stillfield/venv/bin/python -m compileall -q -j 0 --invalidation-mode unchecked-hash \
        /opt/stillfield/venv/lib /opt/stillfield/service \
    && install --directory --owner 10001 --group 10001 --mode 0750 /data

FROM python:3.13-slim-bookworm
COPY --from=build /opt/stillfield /opt/stillfield
COPY --from=build --chown=10001:10001 /data /data
# The processor's cores are shared out by the service; a linear algebra library that starts its own threads on top
# makes every request slower.
ENV PATH=/opt/stillfield/venv/bin:$PATH \
    PYTHONDONTWRITEBYTECODE=1 \
    PYTHONUNBUFFERED=1 \
    OPENBLAS_NUM_THREADS=1 \
    OMP_NUM_THREADS=1 \
    STILLFIELD_HOST=0.0.0.0 \
    STILLFIELD_PORT=8000 \
    STILLFIELD_STORE_PATH=/data/stillfield-problems.sqlite3 \
    STILLFIELD_STUDIES_FOLDER=/data/stillfield-studies
WORKDIR /opt/stillfield
USER 10001:10001
VOLUME /data
EXPOSE 8000
# Asked without a proxy, even where one is set for the container.
HEALTHCHECK --interval=15s --timeout=5s --start-period=20s --retries=3 \
    CMD ["python", "-c", "import os, urllib.request as r; r.build_opener(r.ProxyHandler({})).open('http://127.0.0.1:' + os.environ['STILLFIELD_PORT'] + '/health/live', timeout=4)"]
CMD ["python", "-m", "service"]

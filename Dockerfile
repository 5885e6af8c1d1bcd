# One image for the API, the workers and the keeper: what a container is, its command says (compose.yaml).
#
# A site with a package mirror of its own hands pip's settings in as build secrets, which leave nothing in the image:
#   docker build --secret id=pip_conf,src=pip.conf --secret id=pip_ca,src=mirror-ca.pem -t hourwright:0.1.0 .
# The base can be pinned further, or taken from a registry of one's own: --build-arg BASE=...@sha256:...
ARG BASE=python:3.12-slim-bookworm

FROM ${BASE} AS builder
ENV PIP_NO_CACHE_DIR=1 PIP_DISABLE_PIP_VERSION_CHECK=1 PIP_ROOT_USER_ACTION=ignore
WORKDIR /build
# Without pip: nothing is installed later.
RUN python -m venv --without-pip /opt/venv
COPY requirements.txt .
RUN --mount=type=secret,id=pip_conf,target=/etc/pip.conf --mount=type=secret,id=pip_ca,target=/etc/pip-ca.pem \
    pip --python /opt/venv/bin/python install --require-hashes --only-binary=:all: -r requirements.txt
COPY pyproject.toml README.md LICENSE ./
COPY schemas schemas
COPY service service
COPY workers workers
RUN pip --python /opt/venv/bin/python install --no-deps --no-build-isolation --no-index . \
    && /opt/venv/bin/python -m compileall -q /opt/venv/lib

FROM ${BASE} AS runtime
LABEL org.opencontainers.image.title="hourwright" \
      org.opencontainers.image.version="0.1.0" \
      org.opencontainers.image.licenses="Apache-2.0"
# The numerical libraries keep to one thread: a worker forks, and must have no other when it does.
ENV PATH=/opt/venv/bin:$PATH \
    OPENBLAS_NUM_THREADS=1 \
    OMP_NUM_THREADS=1 \
    MKL_NUM_THREADS=1
# Python's own library comes without compiled files, and the root is read-only later: each start would compile it anew.
RUN groupadd --gid 10001 hourwright \
    && useradd --uid 10001 --gid hourwright --no-create-home --home-dir /nonexistent --shell /usr/sbin/nologin hourwright \
    && python -m compileall -q -x '/(test|tests|idlelib|lib2to3|site-packages)/' "$(python -c 'import os; print(os.path.dirname(os.__file__))')"
COPY --from=builder /opt/venv /opt/venv
WORKDIR /tmp
USER 10001:10001
EXPOSE 8080
STOPSIGNAL SIGTERM
# That of the API; workers and keepers have their own in compose.yaml.
HEALTHCHECK --interval=10s --timeout=5s --start-period=10s --retries=3 CMD ["python", "-I", "-m", "service.health_check"]
CMD ["hourwright", "serve"]

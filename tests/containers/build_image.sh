# Load the stand-ins for the base images, and build the image from $ROOT as its Dockerfile says.
docker image inspect python:3.12-slim-bookworm >/dev/null 2>&1 ||
  docker import --change 'ENV PATH=/usr/local/bin:/usr/local/sbin:/usr/sbin:/usr/bin:/sbin:/bin' --change 'ENV LANG=C.UTF-8' \
    --change 'CMD ["python3"]' "$W/py.tar" python:3.12-slim-bookworm >/dev/null
docker image inspect redis:7.2-bookworm >/dev/null 2>&1 ||
  docker import --change 'VOLUME /data' --change 'WORKDIR /data' --change 'EXPOSE 6379' --change 'CMD ["redis-server"]' \
    "$W/redis.tar" redis:7.2-bookworm >/dev/null
# The distribution's own client: it has the builder that the Dockerfile's secrets need.
# Pip's settings go in as secrets, as at a site with a mirror of its own; they must leave nothing in the image.
DOCKER_BUILDKIT=1 "$W/dk/usr/bin/docker" build --progress plain --network host \
  --secret "id=pip_conf,src=$W/pip.conf" --secret "id=pip_ca,src=$W/ca.pem" -t "hourwright:$VERSION" "$ROOT" >"$W/build.log" 2>&1 ||
  { tail -30 "$W/build.log"; exit 1; }
docker images

# Two stages: the first builds the environment from the lock, the second runs it without build tools.
FROM python:3.11-slim-bookworm AS build
WORKDIR /build
COPY .ci/lock.txt pyproject.toml README.md ./
COPY engine engine
COPY service service
RUN python -m venv /opt/densityloom \
 && /opt/densityloom/bin/pip install --no-cache-dir --requirement lock.txt \
 && /opt/densityloom/bin/pip install --no-cache-dir --no-deps .

FROM python:3.11-slim-bookworm
COPY --from=build /opt/densityloom /opt/densityloom
# Nothing but the store is written at run time: the root may be read-only (docker run --read-only), and the store
# wants a volume: -v densityloom:/var/lib/densityloom. Without one sets cannot be kept; all else works.
RUN mkdir /var/lib/densityloom && chown 10001:10001 /var/lib/densityloom
VOLUME /var/lib/densityloom
ENV DENSITYLOOM_DATA_DIR=/var/lib/densityloom
# The library that draws wants a place for its list of fonts: memory, which is writable all the same.
ENV PATH=/opt/densityloom/bin:$PATH PYTHONDONTWRITEBYTECODE=1 PYTHONUNBUFFERED=1 MPLCONFIGDIR=/dev/shm/densityloom
USER 10001:10001
WORKDIR /opt/densityloom
EXPOSE 8420
HEALTHCHECK --interval=30s --timeout=5s --start-period=20s \
  CMD ["python", "-c", "import urllib.request as u; u.urlopen('http://127.0.0.1:8420/health/ready', timeout=4)"]
# Inside the container all interfaces; publish the port to where it may be reached: -p 127.0.0.1:8420:8420
CMD ["densityloom", "serve", "--host", "0.0.0.0", "--port", "8420"]

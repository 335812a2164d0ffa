# Two stages: build with cgo (SQLite), run on a small Debian with ffmpeg as an ordinary user.
FROM golang:1.26-bookworm AS build
WORKDIR /src
COPY go.mod go.sum ./
RUN go mod download
COPY . .
ARG VERSION=dev
RUN CGO_ENABLED=1 go build -trimpath -buildvcs=false \
      -ldflags "-s -w -X evenshelf/command.Version=${VERSION}" -o /evenshelf .

FROM debian:bookworm-slim
RUN apt-get update \
 && apt-get install -y --no-install-recommends ca-certificates ffmpeg \
 && rm -rf /var/lib/apt/lists/* \
 && useradd --system --uid 8470 --create-home --home-dir /data evenshelf
COPY --from=build /evenshelf /usr/local/bin/evenshelf
USER evenshelf
ENV EVENSHELF_DATA=/data \
    EVENSHELF_LISTEN=0.0.0.0:8470 \
    EVENSHELF_OPEN_NETWORK=true \
    EVENSHELF_SHELF_ROOTS=/shelves
VOLUME /data
EXPOSE 8470
HEALTHCHECK --interval=30s --timeout=5s --start-period=10s --retries=3 \
  CMD ["evenshelf", "version", "--server", "http://127.0.0.1:8470"]
ENTRYPOINT ["evenshelf"]
CMD ["serve"]

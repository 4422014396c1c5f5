# fettle and fettled in a small image, run by an ordinary user. The database is another container (docker-compose.yml).
FROM golang:1.26-bookworm AS build
WORKDIR /src
COPY go.mod go.sum ./
RUN go mod download
COPY . .
RUN CGO_ENABLED=0 go build -trimpath -o /out/ ./cmd/...

FROM debian:bookworm-slim
RUN apt-get update && apt-get install -y --no-install-recommends ca-certificates curl tzdata && rm -rf /var/lib/apt/lists/* \
 && useradd --system --create-home --home-dir /var/lib/fettle fettle
COPY --from=build /out/ /usr/local/bin/
USER fettle
WORKDIR /var/lib/fettle
EXPOSE 7400
ENTRYPOINT ["fettled"]
CMD ["serve"]

# The server alone; docker-compose.yml adds PostgreSQL.
FROM node:20-bookworm-slim AS web
WORKDIR /src/web
COPY web/package.json web/package-lock.json web/.npmrc ./
RUN npm ci --no-audit --no-fund
COPY web/ ./
RUN npm run build

FROM golang:1.26-bookworm AS build
WORKDIR /src
COPY go.mod go.sum ./
RUN go mod download
COPY . .
COPY --from=web /src/web/dist web/dist
RUN CGO_ENABLED=0 go build -trimpath -o /epitally ./cmd/epitally

FROM debian:bookworm-slim
RUN apt-get update && apt-get install -y --no-install-recommends tzdata && rm -rf /var/lib/apt/lists/* \
 && useradd --system --create-home --home-dir /var/lib/epitally epitally
COPY --from=build /epitally /usr/local/bin/epitally
USER epitally
VOLUME /var/lib/epitally
EXPOSE 8620
HEALTHCHECK --interval=10s --timeout=3s --start-period=10s CMD ["epitally", "health", "http://127.0.0.1:8620"]
CMD ["epitally", "serve", "--data", "/var/lib/epitally", "--listen", "0.0.0.0:8620"]

# One image for the API and for the workers: the command says which.

FROM node:24 AS build
WORKDIR /app
COPY package.json package-lock.json ./
COPY client-sdk/package.json client-sdk/
RUN npm ci --ignore-scripts
COPY prisma.config.ts ./
COPY prisma prisma
RUN node prisma/generate.ts
# What development alone needs goes, and with it the PostgreSQL programs of the embedded database:
# a container uses the database that DATABASE_URL names.
RUN npm prune --omit=dev --omit=optional --ignore-scripts

FROM node:24-slim
ENV NODE_ENV=production
WORKDIR /app
COPY --from=build /app/node_modules node_modules
COPY --from=build /app/server/platform/generated server/platform/generated
COPY package.json LICENSE openapi.yaml ./
COPY prisma/migrations prisma/migrations
COPY server server
USER node
EXPOSE 4420
# Node gets the signals itself, as process 1; SIGTERM finishes what is under way.
CMD ["node", "server/main.ts"]

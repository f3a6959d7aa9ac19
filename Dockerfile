FROM python:3.11-slim

WORKDIR /srv/hjsolve
COPY pyproject.toml README.md LICENSE ./
COPY hjsolve hjsolve
COPY api api
RUN python -m venv .venv && .venv/bin/pip install .

RUN useradd --system --no-create-home hjsolve
USER hjsolve
ENV PATH=/srv/hjsolve/.venv/bin:$PATH PYTHONDONTWRITEBYTECODE=1 PYTHONUNBUFFERED=1

EXPOSE 8000
HEALTHCHECK --interval=10s --timeout=3s --start-period=20s CMD \
    ["python", "-c", "import urllib.request as u; u.urlopen('http://127.0.0.1:8000/healthz', timeout=2)"]
CMD ["hjsolve", "serve", "--host", "0.0.0.0", "--port", "8000"]

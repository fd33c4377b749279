#!/bin/sh
# What the checks against outside software need from Debian; what cannot be had is skipped there.
install() {
  apt-get install --yes --no-install-recommends "$@" > /dev/null 2>&1 ||
    { apt-get update > /dev/null 2>&1 && apt-get install --yes --no-install-recommends "$@" > /dev/null; }
}

command -v chromium > /dev/null && command -v pdftotext > /dev/null ||
  install chromium poppler-utils || echo "no Chromium: the checks in a browser are skipped"
[ "$1" = browser ] && exit 0
command -v faketime > /dev/null || install faketime || echo "no faketime: the run on another day is skipped"
command -v osmium > /dev/null || install osmium-tool || echo "no osmium: its checks are skipped"
Rscript -e 'for (p in c("pscl", "VGAM", "MASS")) library(p, character.only = TRUE)' > /dev/null 2>&1 ||
  install r-base-core r-cran-pscl r-cran-vgam r-cran-mass || echo "no R packages: the comparisons with R are skipped"
/usr/bin/python3 -c 'import osgeo_utils, qgis.core' 2> /dev/null ||
  install gdal-bin python3-gdal python3-qgis || echo "no GDAL or QGIS: the checks of the layers are skipped"
exit 0

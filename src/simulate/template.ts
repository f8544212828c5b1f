/**
 * An empty raw-data file (HDF5, gzip, base64), made by scripts/make-template.py: change it there.
 */
export const TEMPLATE_GZIP_BASE64 =
  "H4sIAAAAAAACA+1WvY4TMRD27iawRMcRTojjaIgQihDdIQrKQ7qgVIDgCjrj23USc/uH7Y0uFVeGjsc4IYQQBQ9ARcUDUFHx" +
  "ALzAYa/tza5JgECDRCytbM98Y8/OfB77RX/37tnW5RaQzfdBA7RBtZ3o9vJcfW70T3Tv6H6q+2PXyJ1Cd0nLz+v1bdzew15P" +
  "ok+sZvb50lS9D1btf2z93p0Hsn+s54alH906LkQcMcxLPvb/ct9F/O17aj5q/h5/b/sr/q74O+Ov4dO0WccdxlHJ42pd3fnD" +
  "fR/du78rGWx41/Hq9drm8aotqgNNFTPHzFUGHcepxdP0ntDL8ZajalW71KlMNEUv566rxL5ez3NM5WhbHkz/qXgoXrllHT46" +
  "83O84d/10ysu1XnVUAQ4NZ9X9jvMA8dNqemKc8vFYIRRaDBdYbonZGNMGUmT8p509WgQoSHT83aZkx0QY8RyimOccJiTELS0" +
  "vqEqBmABSmCQ5gnHVErWLT0KnuWEES72hJzEGDKO4gyADQuXjSbCrygdTmowcFF8N8S3ps+IV7njjW2Sx/uYwnQAmTCKMNOY" +
  "q9Y/ojEiEdqPMAxGKElwpIHXbFzAybgC6lp6rYAxYgcFb7WPR9rHdsVHE8eQiEjREGYUq7ettWapTxmXklf2nlhGWP+gkLy2" +
  "9DgJ0pAkQ8gyFGBI8UD58MbCcYqe4oCndAJDEedEkkGG4a2FUxupXOQC8E6+bzpXyphv+mDzuRgJf4vkGp69X5CvebZU8FN4" +
  "QY3thyVss5F4ylWMPy1hyyISVG0/L7Mv4kSeBV7waPb3X5dYg4SHheSbPJctxdMDlbcijZL9OIPboMIjk5c5uJugcm5nXMcU" +
  "DXGxdy2v8t91SanxK00ENRT3TE2u6ot4i1HLklOcYV5hwJq9H1ZLrv8gH8qaUt5/Rp4zVUc2dDzN3ejPiYXEQpKUPl9wlE3H" +
  "tvFntaKwGUQp0la3FtjMy5s8O8V7XgC3tC/zcOZ9Fv4CV97znnXPu64p6fJpx021/w5Rlca3kA8AAA==";

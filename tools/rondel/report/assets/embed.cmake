# cmake -D FILE=in -D SYMBOL=name -D OUT=out.cc -P embed.cmake: FILE's bytes as asset_<name>().
file(READ ${FILE} bytes HEX)
string(REGEX REPLACE "(..)" "0x\\1," bytes "${bytes}")
string(REGEX REPLACE "(................................................................................)"
                     "\\1\n" bytes "${bytes}")
file(
  WRITE ${OUT}
  "#include \"tools/rondel/report/assets/assets.h\"\n\n"
  "namespace rondel::app::report {\n"
  "namespace {\nconstexpr unsigned char kBytes[] = {\n${bytes}};\n}  // namespace\n"
  "std::string_view asset_${SYMBOL}() {\n"
  "  return {reinterpret_cast<const char*>(kBytes), sizeof kBytes};\n}\n"
  "}  // namespace rondel::app::report\n")

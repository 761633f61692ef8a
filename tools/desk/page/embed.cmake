# cmake -D FOLDER=page -D OUT=out.cc -P embed.cmake: the page's files as tools/desk/page.h has them.
file(GLOB files LIST_DIRECTORIES false ${FOLDER}/*.html ${FOLDER}/*.css ${FOLDER}/*.js)
list(SORT files)
set(arrays)
set(rows)
foreach(path ${files})
  get_filename_component(name ${path} NAME)
  string(MAKE_C_IDENTIFIER ${name} symbol)
  file(READ ${path} bytes HEX)
  string(REGEX REPLACE "(..)" "0x\\1," bytes "${bytes}")
  string(REGEX REPLACE "(................................................................................)"
                       "\\1\n" bytes "${bytes}")
  string(APPEND arrays "constexpr unsigned char k_${symbol}[] = {\n${bytes}};\n")
  string(APPEND rows "    {\"${name}\", text(k_${symbol})},\n")
endforeach()
file(
  WRITE ${OUT}
  "#include \"tools/desk/page.h\"\n\n"
  "namespace rondel::desk {\nnamespace {\n${arrays}"
  "template <std::size_t size>\nstd::string_view text(const unsigned char (&bytes)[size]) {\n"
  "  return {reinterpret_cast<const char*>(bytes), size};\n}\n"
  "const PageFile kFiles[] = {\n${rows}};\n}  // namespace\n"
  "std::span<const PageFile> page_files() { return kFiles; }\n"
  "}  // namespace rondel::desk\n")

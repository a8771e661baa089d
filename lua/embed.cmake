# Writes OUT: a C file with the texts of FILES (Lua modules) as arrays, by name without the ending: lua/run.lua is "run",
# lua/models/grains.lua is "models/grains". Character constants, because a number above 127 would not fit a char.
set(arrays "")
set(table "")
set(number 0)
foreach(file ${FILES})
  string(REGEX REPLACE "^.*/lua/(.*)[.]lua$" "\\1" name ${file})
  file(READ ${file} hex HEX)
  file(SIZE ${file} size)
  string(REGEX REPLACE "([0-9a-f][0-9a-f])" "'\\\\x\\1'," bytes "${hex}")
  string(APPEND arrays "static const char text_${number}[] = {${bytes}0};\n")
  string(APPEND table "    {\"${name}\", text_${number}, ${size}},\n")
  math(EXPR number "${number} + 1")
endforeach()
file(WRITE ${OUT} "#include <stddef.h>\n${arrays}
struct module { const char *name, *text; size_t size; };
extern const struct module mt_lua_modules[];
const struct module mt_lua_modules[] = {\n${table}    {NULL, NULL, 0},\n};\n")

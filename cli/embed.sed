# Turns a text file into lines of C string literals, one per line, for #include inside an array.
s/\\/\\\\/g
s/"/\\"/g
s/^/"/
s/$/\\n",/

mod mechanics;

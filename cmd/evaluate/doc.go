// Command evaluate measures the stages against truth that they have not seen: rendered
// parts, and pictures of real ones where a folder of them is given. It is no test of
// speed and changes no recipe.
package main

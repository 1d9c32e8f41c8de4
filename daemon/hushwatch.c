/* hushwatch: the tool. */
int main(void)
{
    return 2;
}

/* hushwatch-capture: live sound. */
int main(void)
{
    return 2;
}
